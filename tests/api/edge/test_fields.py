import json
from enum import StrEnum
from typing import Annotated

import pytest
from pydantic import Field, TypeAdapter, ValidationError

from service import units
from service.api.body import validated
from service.api.fields import (
    Celsius,
    Day,
    Edge,
    ExternalId,
    Fraction,
    Instant,
    KilopascalAbsolute,
    Labels,
    Litres,
    Metres,
    Name,
    Newtons,
    Notes,
    Patch,
    Quantity,
    RecordIdText,
    Tag,
    is_record_id,
    patch_model,
    patch_of,
    read_as,
)
from service.clock import SystemClock
from service.errors import FieldsRefused
from service.store.ids import new_record_id
from service.store.records import folded_tag


class State(StrEnum):
    IN_SERVICE = "in-service"
    EMPTY = "empty"


class Door(Edge):
    """A door."""

    width_m: Metres
    closer_n: Newtons | None = None


class Share(Edge):
    """A share."""

    share: Fraction
    kept: bool = True


class VesselCreate(Edge):
    """A vessel as it is made."""

    tag: Tag
    capacity_l: Annotated[float, Quantity(units.LITRES, gt=0, le=1e6)]
    contents_l: Litres | None = None
    counted_on: Day | None = None
    built_on: Day = "2020-01-01"
    state: State = State.IN_SERVICE
    door: Door | None = None
    serves: Annotated[list[Share], Field(default_factory=list)]
    labels: Annotated[Labels, Field(default_factory=dict)]
    attended: bool | None = None
    count: Annotated[int, Field(ge=0)] = 0


@patch_of(VesselCreate, never_null=frozenset({"contents_l"}), but=frozenset({"built_on"}))
class VesselPatch(Patch):
    """What changes in a vessel."""


A_VESSEL = {"tag": "D-1", "capacity_l": 50}


def errors_of(kind, text):
    with pytest.raises(ValidationError) as refused:
        TypeAdapter(kind).validate_json(json.dumps(text))
    return refused.value.errors()[0]["type"]


def read(kind, text):
    return TypeAdapter(kind).validate_json(json.dumps(text))


def refusal(model, value):
    with pytest.raises(FieldsRefused) as refused:
        validated(model, value)
    return [(error.pointer, error.code) for error in refused.value.errors]


@pytest.mark.parametrize("tag", ["D-1", "Ø-Dewar 3", "液氮-04", "a" * 64])
def test_a_tag_is_any_printable_label(tag):
    assert read(Tag, tag) == tag


@pytest.mark.parametrize(
    ("tag", "code"),
    [
        ("", "too-short"),
        (" ", "blank"),
        ("a" * 65, "too-long"),
        ("\U0001f9ca" * 64, "too-long"),
        (" D-1", "not-trimmed"),
        ("D-1\N{NO-BREAK SPACE}", "not-trimmed"),
        ("D\n1", "control-character"),
        ("D\N{ZERO WIDTH SPACE}1", "control-character"),
        ("D\N{RIGHT-TO-LEFT OVERRIDE}1", "bidirectional-mark"),
        ("D\N{LEFT-TO-RIGHT MARK}1", "bidirectional-mark"),
    ],
)
def test_a_tag_that_does_not_show_as_it_is_is_refused(tag, code):
    assert errors_of(Tag, tag) == code


def test_texts_are_composed_before_they_are_kept_and_compared():
    decomposed = "Dewar e\N{COMBINING ACUTE ACCENT}"
    assert read(Tag, decomposed) == "Dewar \N{LATIN SMALL LETTER E WITH ACUTE}"
    assert folded_tag(read(Tag, decomposed)) == folded_tag(decomposed.upper())


def test_notes_take_lines_and_tabs_and_names_do_not():
    assert read(Notes, "one\r\ntwo\tthree") == "one\ntwo\tthree"
    assert errors_of(Name, "one\ntwo") == "control-character"
    assert errors_of(Notes, "one\vtwo") == "control-character"
    assert errors_of(Notes, "x" * 4001) == "too-long"
    assert errors_of(Notes, "\U0001f9ca" * 2001) == "too-long"
    assert read(Name, "") == ""
    assert errors_of(ExternalId, "") == "too-short"


def test_labels_have_plain_names_and_are_few():
    assert read(Labels, {"ward/3": "cardiology"}) == {"ward/3": "cardiology"}
    assert errors_of(Labels, {"a b": "x"}) == "string_pattern_mismatch"
    assert errors_of(Labels, {f"n{number}": "x" for number in range(21)}) == "too_long"


def test_a_record_id_is_what_the_store_makes_and_nothing_else():
    made = new_record_id(SystemClock().now())
    assert read(RecordIdText, made) == made
    assert is_record_id(made)
    for wrong in (made.upper(), made + "\n", made[:-1], "0" * 36, f"{made[:14]}4{made[15:]}"):
        assert not is_record_id(wrong)
        assert errors_of(RecordIdText, wrong) == "string_pattern_mismatch"


@pytest.mark.parametrize("day", ["2027-02-29", "2027-2-1", "20270201", "2027-W05-1", "1066-10-14"])
def test_what_is_no_day_is_refused(day):
    assert errors_of(Day, day) in ("not-a-day", "out-of-range")


def test_a_day_stays_text():
    assert read(Day, "2028-02-29") == "2028-02-29"


def test_a_moment_is_kept_in_utc_with_six_digits():
    """RFC 3339, section 5.8: 1996-12-19T16:39:57-08:00 is 1996-12-20T00:39:57Z."""
    assert read(Instant, "1996-12-19T16:39:57-08:00") == "1996-12-20T00:39:57.000000Z"


@pytest.mark.parametrize(
    "moment",
    ["2027-03-01T08:00:00", "2027-03-01", "2027-03-01T08:00:00Z[Europe/Berlin]", "now", "1e9"],
)
def test_a_naive_moment_and_one_with_a_suffix_are_refused(moment):
    assert errors_of(Instant, moment) == "not-a-moment"


def test_a_quantity_is_a_number_or_a_text_with_a_unit():
    assert read(Litres, 5) == 5.0
    assert read(Litres, "2 m3") == 2000.0
    assert read(Celsius, "-196 °C") == -196.0


@pytest.mark.parametrize("sent", [True, False, None, "7", "seven", [], {}, "5 kg", -1, 1e9])
def test_what_is_no_volume_in_range_is_refused(sent):
    with pytest.raises(ValidationError):
        read(Litres, sent)


def test_an_absolute_pressure_is_never_taken_for_a_gauge_pressure():
    assert read(KilopascalAbsolute, "1013.25 mbar(a)") == pytest.approx(101.325, rel=1e-15)
    with pytest.raises(ValidationError):
        read(KilopascalAbsolute, "1 barg")


def test_a_field_around_a_quantity_narrows_it_in_check_and_schema():
    class Narrow(Edge):
        """Narrower."""

        a_l: Annotated[Litres, Field(gt=0, description="How much.")]

    assert refusal(Narrow, {"a_l": 0}) == [("/a_l", "out-of-range")]
    number = Narrow.model_json_schema()["properties"]["a_l"]["anyOf"][0]
    assert number["exclusiveMinimum"] == 0
    assert "gt" not in number


def test_the_schema_of_a_quantity_shows_both_forms_with_bounds_and_an_example():
    number, text = VesselCreate.model_json_schema()["properties"]["capacity_l"]["anyOf"]
    assert (number["type"], number["exclusiveMinimum"], number["maximum"]) == ("number", 0.0, 1e6)
    assert text["type"] == "string"
    assert units.read_quantity(text["examples"][0], units.LITRES).value > 0


def test_unknown_and_missing_fields_are_told_where_they_are():
    found = refusal(VesselCreate, {"tag": "D-1", "volume": 3, "door": {"closer_n": 1}})
    assert set(found) == {
        ("/capacity_l", "required"),
        ("/volume", "unknown-field"),
        ("/door/width_m", "required"),
    }


@pytest.mark.parametrize(
    ("fields", "pointer", "code"),
    [
        ({"capacity_l": True}, "/capacity_l", "not-a-number"),
        ({"capacity_l": "7"}, "/capacity_l", "unit-missing"),
        ({"capacity_l": "7 kg"}, "/capacity_l", "unit-of-other-kind"),
        ({"capacity_l": 0}, "/capacity_l", "out-of-range"),
        ({"tag": 7}, "/tag", "not-a-text"),
        ({"tag": "a\u202eb"}, "/tag", "bidirectional-mark"),
        ({"state": "full"}, "/state", "not-one-of"),
        ({"attended": "yes"}, "/attended", "not-a-boolean"),
        ({"attended": 1}, "/attended", "not-a-boolean"),
        ({"count": "7"}, "/count", "not-an-integer"),
        ({"count": 7.5}, "/count", "not-an-integer"),
        ({"count": True}, "/count", "not-an-integer"),
        ({"door": []}, "/door", "not-an-object"),
        ({"serves": {}}, "/serves", "not-a-list"),
        ({"serves": [{"share": 0.5}, {"share": 2}]}, "/serves/1/share", "out-of-range"),
        ({"labels": {"a b": "x"}}, "/labels/a b", "wrong-form"),
        ({"labels": {"a": 7}}, "/labels/a", "not-a-text"),
    ],
)
def test_a_bad_field_is_refused_with_its_pointer_and_a_code_of_ours(fields, pointer, code):
    assert refusal(VesselCreate, A_VESSEL | fields) == [(pointer, code)]


def test_a_refusal_never_repeats_a_value():
    with pytest.raises(FieldsRefused) as refused:
        validated(VesselCreate, A_VESSEL | {"state": "s3cret", "capacity_l": "s3cret L", "tag": 9})
    assert "s3cret" not in repr(refused.value.errors)
    assert refused.value.__cause__ is None


def test_a_pointer_can_begin_further_out():
    with pytest.raises(FieldsRefused) as refused:
        validated(VesselCreate, {"capacity_l": 1}, at="/changes/3/fields")
    assert refused.value.errors[0].pointer == "/changes/3/fields/tag"


def test_a_patch_holds_what_was_sent_and_nothing_else():
    patch = validated(VesselPatch, {"capacity_l": "47 gal", "door": {"closer_n": None}})
    assert patch.changes() == {
        "capacity_l": pytest.approx(177.914, abs=5e-4),  # 47 times 3.785412 L, NIST SP 811.
        "door": {"closer_n": None},
    }
    assert validated(VesselPatch, {}).changes() == {}


def test_a_list_in_a_patch_is_whole_with_its_defaults():
    patch = validated(VesselPatch, {"serves": [{"share": 0.5}]})
    assert patch.changes() == {"serves": [{"share": 0.5, "kept": True}]}


def test_a_patch_gives_plain_json_values():
    assert type(validated(VesselPatch, {"state": "empty"}).changes()["state"]) is str


@pytest.mark.parametrize("name", ["tag", "capacity_l", "state", "contents_l", "serves"])
def test_null_is_refused_for_what_cannot_be_empty(name):
    assert [pointer for pointer, _ in refusal(VesselPatch, {name: None})] == [f"/{name}"]


@pytest.mark.parametrize("name", ["door", "counted_on", "attended"])
def test_null_removes_what_can_be_empty(name):
    assert validated(VesselPatch, {name: None}).changes() == {name: None}


def test_a_patch_refuses_unknown_fields_and_those_that_never_change():
    assert refusal(VesselPatch, {"built_on": "2020-01-01"}) == [("/built_on", "unknown-field")]
    assert refusal(VesselPatch, {"door": {"colour": "red"}}) == [("/door/colour", "unknown-field")]
    assert refusal(VesselPatch, {"door": {"width_m": None}}) == [("/door/width_m", "not-a-number")]


def test_the_schema_of_a_patch_requires_nothing_and_tells_no_default():
    schema = VesselPatch.model_json_schema()
    assert "required" not in schema
    assert not any("default" in field for field in schema["properties"].values())
    assert schema["title"] == "VesselPatch"
    assert patch_model(VesselCreate, "Other").model_json_schema()["title"] == "Other"


def test_every_quantity_sent_with_a_unit_is_answered_as_it_was_read():
    raw = {
        "tag": "D-1",
        "capacity_l": "47 gal",
        "contents_l": 30,
        "door": {"width_m": "3 ft"},
        "serves": [{"share": 0.5}, {"share": "25 %"}],
    }
    for model in (VesselCreate, VesselPatch):
        found = read_as(raw, validated(model, raw))
        assert [(entry.pointer, entry.sent, entry.unit) for entry in found] == [
            ("/capacity_l", "47 gal", "gal"),
            ("/door/width_m", "3 ft", "ft"),
            ("/serves/1/share", "25 %", "%"),
        ]
        assert "US gallon" in found[0].note
        assert found[1].read == 0.9144
        assert found[1].note is None
        assert read_as(raw, model) == found
