from dataclasses import replace

import pytest
import sqlalchemy as sa
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from service.errors import DuplicateExternalId, DuplicateTag, FieldsRefused
from service.store.live import (
    controls_of_vessels,
    count_records,
    delete_record,
    equipment_of,
    get_record,
    get_records,
    insert_record,
    list_records,
    record_by_external_id,
    record_by_tag,
    referrers_of,
    revise_record,
    rooms_of_site,
    rooms_with_fluid,
    sites_with_basis,
    units_boosted_by,
)
from service.store.records import body, canonical
from service.store.scope import EVERYTHING
from service.store.tables.registry import KINDS
from tests.store.estate import AS_SERVICE, a_record


def page(connection, kind="vessel", filters=None, **changes):
    asked = {"sort": "id", "descending": False, "after": None, "limit": 100} | changes
    return list_records(EVERYTHING, connection, kind, filters or {}, **asked)


def ids(records):
    return [record.id for record in records]


@pytest.mark.parametrize("kind", KINDS)
def test_every_kind_comes_back_as_it_was_stored(database, estate, kind):
    stored = next(record for record in estate.records if record.kind == kind)
    with database.reading() as connection:
        found = get_record(EVERYTHING, connection, kind, stored.id)
    assert found == stored
    # Key order aside, it is the same to the byte, so that its hash is.
    assert canonical(body(found)) == canonical(body(stored))


def test_extreme_numbers_and_texts_come_back_to_the_bit(database, estate, store):
    labels = {"a.b": "1e16", '$"[0]': "Straße", "日本": "\U0001f9ca"}
    vessel = a_record(
        "vessel",
        estate.site.id,
        room_id=estate.room.id,
        fluid_id=estate.fluid.id,
        labels=labels,
        capacity_l=5e-324,
        gross_l=1.7976931348623157e308,
        filling={"by": None, "whole": 10**15, "float": 1e16, "minus": -0.0},
    )
    store(vessel)
    with database.reading() as connection:
        found = get_record(EVERYTHING, connection, "vessel", vessel.id)
    assert canonical(body(found)) == canonical(body(vessel))


def test_a_record_with_a_missing_or_unknown_field_is_refused(estate, store):
    fields = dict(estate.vessel.fields)
    for wrong in (fields | {"color": "red"}, {k: v for k, v in fields.items() if k != "notes"}):
        with pytest.raises(ValueError, match="has other fields"):
            store(replace(estate.vessel, id="v", fields=wrong))


def test_a_number_that_is_not_finite_is_refused(estate, store):
    for number in (float("nan"), float("inf")):
        vessel = a_record("vessel", estate.site.id, fluid_id=estate.fluid.id, capacity_l=number)
        with pytest.raises(sa.exc.StatementError, match="not finite"):
            store(vessel)


@pytest.mark.parametrize(
    ("kind", "reference"),
    [("vessel", "room_id"), ("detector", "room_id"), ("vessel", "fluid_id"),
     ("room", "purge_fluid_id"), ("site", "basis_id"), ("basis", "derived_from_id"),
     ("opening", "room_id"), ("opening", "other_room_id"), ("control", "vessel_id"),
     ("ventilation-unit", "boost_trigger"), ("supply-line", "source_vessel_id"),
     ("supply-line", "fluid_id")],
)  # fmt: skip
def test_no_reference_crosses_sites(estate, other_estate, write, kind, reference):
    """Neither where a record is made nor where it is changed."""
    theirs = {"room_id": other_estate.room, "other_room_id": other_estate.room,
              "vessel_id": other_estate.vessel, "source_vessel_id": other_estate.vessel,
              "boost_trigger": other_estate.detector,
              "fluid_id": other_estate.fluid,
              "purge_fluid_id": other_estate.fluid, "basis_id": other_estate.basis,
              "derived_from_id": other_estate.basis}[reference]  # fmt: skip
    mine = next(record for record in estate.records if record.kind == kind)
    changed = replace(mine, revision=2, fields={**mine.fields, reference: theirs.id})
    with pytest.raises(sa.exc.DBAPIError, match=r"another site|(?i:foreign key)"):
        write(lambda session: revise_record(session, changed, 1))
    if kind != "site":
        new = replace(changed, id="new", fields={**changed.fields, "tag": "new"} |
                      ({"external_id": None}))  # fmt: skip
        with pytest.raises(sa.exc.DBAPIError, match=r"another site|(?i:foreign key)"):
            write(lambda session: insert_record(session, new))


def test_a_unit_serves_no_room_of_another_site(estate, other_estate, store):
    serves = [{"room_id": other_estate.room.id, "share": 1.0}]
    with pytest.raises(sa.exc.IntegrityError):
        store(a_record("ventilation-unit", estate.site.id, serves=serves))


def test_a_shared_basis_derives_from_no_site(shared, estate, store):
    with pytest.raises(sa.exc.DBAPIError, match="another site"):
        store(a_record("basis", None, tag="x", derived_from_id=estate.basis.id, derived_from="x"))


@pytest.mark.parametrize("kind", KINDS)
def test_a_tag_is_taken_however_it_is_spelt(estate, store, kind):
    mine = next(record for record in estate.records if record.kind == kind)
    # U+00C5 against A with a ring above, and capitals against small letters.
    store(a_copy(mine, tag="Åre straße", external_id="x"))
    with pytest.raises(DuplicateTag):
        store(a_copy(mine, tag="ÅRE STRASSE", external_id="y"))
    with pytest.raises(DuplicateExternalId):
        store(a_copy(mine, tag="another", external_id="x"))


def a_copy(record, **fields):
    site_id = None if record.kind == "site" else record.site_id
    return a_record(record.kind, site_id, **{**record.fields, **fields})


@pytest.mark.parametrize("kind", ["basis", "fluid"])
def test_a_shared_tag_is_taken_once(shared, store, kind):
    with pytest.raises(DuplicateTag):
        store(a_record(kind, None, tag="BASELINE" if kind == "basis" else "Nitrogen"))


def test_a_tag_names_the_sites_own_before_what_is_shared(database, shared, estate, store):
    own = a_record("fluid", estate.site.id, tag="Nitrogen")
    with database.reading() as connection:
        found = record_by_tag(EVERYTHING, connection, "fluid", estate.site.id, "NITROGEN")
    assert found == shared.fluid
    store(own)
    with database.reading() as connection:
        found = record_by_tag(EVERYTHING, connection, "fluid", estate.site.id, "nitrogen")
        other = record_by_tag(EVERYTHING, connection, "fluid", None, "nitrogen")
    assert (found, other) == (own, shared.fluid)


def test_records_are_found_by_ids_tag_and_external_id(database, estate):
    site = estate.site.id
    with database.reading() as connection:
        both = get_records(EVERYTHING, connection, "room", [estate.room.id, "none", estate.room.id])
        by_tag = record_by_tag(EVERYTHING, connection, "site", None, estate.site.fields["tag"])
        by_id = record_by_external_id(EVERYTHING, connection, "detector", site, "D/1")
        none = record_by_external_id(EVERYTHING, connection, "detector", site, "d/1")
    assert (both, by_tag, by_id, none) == ([estate.room], estate.site, estate.detector, None)


def test_equipment_is_what_stands_in_a_room_or_serves_it(database, estate, other_estate, store):
    outdoors = a_record("vessel", estate.site.id, fluid_id=estate.fluid.id)
    idle = a_record("ventilation-unit", estate.site.id)
    store(outdoors, idle)
    with database.reading() as connection:
        assert equipment_of(EVERYTHING, connection, [estate.room.id]) == [
            estate.opening, estate.detector, estate.unit, estate.vessel, estate.line,
            estate.control,
        ]  # fmt: skip
        assert rooms_of_site(EVERYTHING, connection, estate.site.id) == [estate.room.id]


def test_a_control_belongs_to_its_room_or_to_that_of_its_vessel(database, estate, write, store):
    second = a_record("room", estate.site.id)
    of_room = a_record("control", estate.site.id, room_id=second.id)
    store(second, of_room)
    vessel = replace(
        estate.vessel, revision=2, fields={**estate.vessel.fields, "room_id": second.id}
    )
    assert write(lambda session: revise_record(session, vessel, 1))
    with database.reading() as connection:
        found = equipment_of(EVERYTHING, connection, [second.id])
        assert found == [vessel, estate.control, of_room]
        assert estate.control not in equipment_of(EVERYTHING, connection, [estate.room.id])
        assert controls_of_vessels(EVERYTHING, connection, [vessel.id]) == [estate.control]


def test_a_boost_is_kept_by_hand_by_a_detector_or_not_at_all(database, estate, write):
    unit = estate.unit
    for revision, trigger in enumerate(("manual", None, estate.detector.id), start=2):
        fields = {**unit.fields, "boost_trigger": trigger}
        unit = replace(unit, revision=revision, fields=fields)
        assert write(lambda session, unit=unit: revise_record(session, unit, unit.revision - 1))
        boosted = [unit] if trigger == estate.detector.id else []
        with database.reading() as connection:
            assert get_record(EVERYTHING, connection, "ventilation-unit", unit.id) == unit
            assert units_boosted_by(EVERYTHING, connection, [estate.detector.id]) == boosted


def test_a_unit_serves_what_it_says_after_each_change(database, estate, write, store):
    second = a_record("room", estate.site.id)
    store(second)
    unit = replace(estate.unit, revision=2, fields={
        **estate.unit.fields, "serves": [{"room_id": second.id, "share": 1.0}]})  # fmt: skip
    assert write(lambda session: revise_record(session, unit, 1))
    with database.reading() as connection:
        assert unit in equipment_of(EVERYTHING, connection, [second.id])
        assert unit not in equipment_of(EVERYTHING, connection, [estate.room.id])
        assert [*referrers_of(EVERYTHING, connection, "room", second.id)] == [
            ("ventilation-unit", unit.id, unit.fields["tag"])
        ]
    assert write(lambda session: delete_record(session, unit))
    with database.reading() as connection:
        assert equipment_of(EVERYTHING, connection, [second.id]) == []


def test_what_names_a_record_is_found(database, shared, estate):
    room = estate.room

    def named_by(kind, record):
        return [(found.kind, found.id) for found in referrers_of(EVERYTHING, c, kind, record.id)]

    with database.reading() as c:
        assert named_by("room", room) == [
            ("opening", estate.opening.id), ("detector", estate.detector.id),
            ("vessel", estate.vessel.id), ("ventilation-unit", estate.unit.id),
            ("supply-line", estate.line.id),
        ]  # fmt: skip
        assert named_by("detector", estate.detector) == [
            ("ventilation-unit", estate.unit.id), ("supply-line", estate.line.id),
        ]  # fmt: skip
        assert named_by("fluid", shared.fluid) == [
            ("room", room.id), ("vessel", estate.vessel.id), ("supply-line", estate.line.id),
        ]  # fmt: skip
        assert named_by("basis", shared.basis) == [("site", estate.site.id),
                                                   ("basis", estate.basis.id)]  # fmt: skip
        assert len(named_by("site", estate.site)) == 9
        assert len(referrers_of(EVERYTHING, c, "site", estate.site.id, limit=2)) == 2
        assert set(named_by("vessel", estate.vessel)) == {
            ("control", estate.control.id), ("supply-line", estate.line.id),
        }  # fmt: skip
        assert named_by("supply-line", estate.line) == []
        assert named_by("control", estate.control) == []
        assert rooms_with_fluid(EVERYTHING, c, shared.fluid.id) == [room.id]
        assert rooms_with_fluid(EVERYTHING, c, estate.fluid.id) == []
        assert sites_with_basis(EVERYTHING, c, shared.basis.id) == [estate.site.id]
        assert sites_with_basis(EVERYTHING, c, estate.basis.id) == []


def test_a_revision_is_written_only_over_the_one_expected(database, estate, write):
    second = replace(estate.room, revision=2, fields={**estate.room.fields, "name": "Cold store"})
    assert not write(lambda session: revise_record(session, second, 2))
    assert write(lambda session: revise_record(session, second, 1))
    assert not write(lambda session: revise_record(session, second, 1))
    assert not write(lambda session: delete_record(session, estate.room))
    with database.reading() as connection:
        assert get_record(EVERYTHING, connection, "room", estate.room.id) == second


def test_filters_take_values_texts_lists_labels_and_nothing(database, estate):
    wanted = [
        {}, {"room_id": estate.room.id}, {"capacity_l": 50}, {"capacity_l": "50"},
        {"mobile": False}, {"mobile": "false"}, {"notes": "a\nb"}, {"tag": "VESSEL-*"},
        {"state": ["empty", "in-service"]}, {"manifold": None}, {"revision": "1"},
        {"counted_at": "2027-02-28T23:59:59.000001Z"},
    ]  # fmt: skip
    with database.reading() as connection:
        for filters in wanted:
            if filters.get("tag"):
                filters = {"tag": estate.vessel.fields["tag"].upper()}
            assert page(connection, filters=filters) == [estate.vessel], filters
            assert count_records(EVERYTHING, connection, "vessel", filters) == 1
        for filters in ({"room_id": "none"}, {"capacity_l": 51}, {"mobile": True}, {"state": []}):
            assert page(connection, filters=filters) == []
        assert page(connection, "room", {"label.wing": "B"}) == [estate.room]
        assert page(connection, "room", {"label.wing": "b"}) == []
        assert page(connection, "room", {'label.$"[0]': "B"}) == []
        assert page(connection, "room", {"label.wing": None}) == []
        assert page(connection, "room", {"label.floor": None}) == [estate.room]


@pytest.mark.parametrize(
    ("filters", "parameter"),
    [
        ({"color": "red"}, "color"),
        ({"labels": "x"}, "labels"),
        ({"capacity_l": "many"}, "capacity_l"),
        ({"capacity_l": "nan"}, "capacity_l"),
        ({"mobile": "yes"}, "mobile"),
        ({"mobile": 1}, "mobile"),
        ({"revision": 10**30}, "revision"),
        ({"state": 3}, "state"),
        ({"state": [1]}, "state"),
        ({"counted_at": "today"}, "counted_at"),
        ({"metadata": "x"}, "metadata"),
        ({"keys": 1}, "keys"),
    ],
)
def test_a_filter_that_cannot_be_is_refused_by_its_name(database, estate, filters, parameter):
    with database.reading() as connection, pytest.raises(FieldsRefused) as refused:
        page(connection, filters=filters)
    assert refused.value.errors[0].parameter == parameter


@pytest.mark.parametrize("sort", ["color", "labels", "filling", ""])
def test_a_sort_that_has_no_order_is_refused(database, estate, sort):
    with database.reading() as connection, pytest.raises(FieldsRefused) as refused:
        page(connection, sort=sort)
    assert refused.value.errors[0].parameter == "sort"


def test_pages_and_orders_are_alike_on_both_databases(database, estate, store):
    """By code point, and nulls last both ways; Python compares text by code point too."""
    texts = ["a", "B", "ä", "Z", "é", "日", "\U0001f9ca", "a b", "_", None, "~", None, "10", "9"]
    vessels = [a_record("vessel", estate.site.id, fluid_id=estate.fluid.id, manifold=text)
               for text in texts]  # fmt: skip
    store(*vessels)
    for descending in (False, True):
        with database.reading() as connection:
            found = all_pages(connection, "manifold", descending, 3)
        named = sorted((text for text in texts if text), reverse=descending)
        assert [record.fields["manifold"] for record in found] == [*named, None, None, None]


def all_pages(connection, sort, descending, limit):
    seen, after = [], None
    while found := page(connection, sort=sort, descending=descending, after=after, limit=limit):
        seen += found
        value = found[-1].id if sort == "id" else found[-1].fields[sort]
        after = (value, found[-1].id)
    return seen


SORTS = ("capacity_l", "manifold", "tag", "mobile", "counted_at", "id", "use_l_day")
MOMENTS = ("2027-01-01T00:00:00.000000Z", "2027-01-01T00:00:00.000001Z", None)


@pytest.mark.slow
@settings(
    max_examples=12, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(data=st.data())
def test_paging_shows_what_lived_throughout_exactly_once(database, writer, estate, data):
    """Others insert and delete between any two pages."""
    made = st.fixed_dictionaries({
        "capacity_l": st.sampled_from([1.0, 2.0, 2.5]),
        "manifold": st.sampled_from(["a", "B", "ä", None]),
        "mobile": st.sampled_from([True, False, None]),
        "counted_at": st.sampled_from(MOMENTS),
        "use_l_day": st.one_of(st.none(), st.floats(0, 1e9)),
    })  # fmt: skip
    site, fluid = estate.site.id, estate.fluid.id

    def insert(many):
        new = [a_record("vessel", site, fluid_id=fluid, **fields) for fields in many]
        writer.run_now(lambda s: [insert_record(s, record) for record in new], AS_SERVICE)
        return {record.id: record for record in new}

    lived = insert(data.draw(st.lists(made, min_size=1, max_size=8)))
    passing = insert(data.draw(st.lists(made, max_size=4)))

    def disturb():
        passing.update(insert(data.draw(st.lists(made, max_size=2))))
        if passing and data.draw(st.booleans()):
            gone = passing.pop(data.draw(st.sampled_from(sorted(passing))))
            writer.run_now(lambda s: delete_record(s, gone), AS_SERVICE)

    sort = data.draw(st.sampled_from(SORTS))
    descending, limit = data.draw(st.booleans()), data.draw(st.integers(1, 4))
    seen, after = [], None
    for number in range(100):
        with database.reading() as connection:
            found = page(connection, filters={"room_id": None}, sort=sort, descending=descending,
                         after=after, limit=limit)  # fmt: skip
        if not found:
            break
        seen += ids(found)
        last = found[-1]
        after = (last.id if sort == "id" else last.fields[sort], last.id)
        if number < 20:  # What is put in faster than it is read is never read to its end.
            disturb()
    else:
        pytest.fail("The pages do not end.")
    assert len(seen) == len(set(seen))
    assert lived.keys() <= set(seen)
    for record in (*lived.values(), *passing.values()):
        writer.run_now(lambda s, gone=record: delete_record(s, gone), AS_SERVICE)
