"""What cannot stand in a record, by itself or beside others, is refused by its field."""

import shutil
from datetime import timedelta
from functools import partial

import pytest

from service.changes.records import change_several
from service.changes.requested import RecordChange
from service.errors import FieldsRefused, StillReferred
from service.store.live import get_record
from tests.changes.conftest import line_on
from tests.conftest import MOMENT

MORNING, NOON = "2027-04-01T06:00:00Z", "2027-04-01T12:00:00Z"
EVENING, NIGHT = "2027-04-01T18:00:00Z", "2027-04-01T22:00:00Z"
TODAY = MOMENT.date()
DAY_AFTER_TOMORROW = (TODAY + timedelta(days=2)).isoformat()
MIXTURE = {
    "molar_mass_g_mol": 20.0, "boiling_k": 100.0, "condensed_density_kg_m3": 500.0,
    "oxygen_fraction": 0.0, "solid": False, "hazards": ["flammable"], "settles": "low",
}  # fmt: skip


STOCK = {
    "room": ("room", {"tag": "R", "volume_m3": 90.0, "floor_area_m2": 30.0, "height_m": 3.0}),
    "other": ("room", {"tag": "R-2", "volume_m3": 90.0}),
    "detector": ("detector", {"room": "R", "gas": "oxygen", "height_m": 1.0}),
    "unit": ("ventilation-unit", {"serves": [{"room": "R", "share": 1.0}]}),
    "vessel": ("vessel", {"tag": "V", "room": "R", "fluid": "nitrogen", "kind": "open-dewar",
                          "capacity_l": 30.0}),
    "magnet": ("vessel", {"tag": "M", "room": "R", "fluid": "helium", "kind": "magnet",
                          "capacity_l": 30.0}),
    "opening": ("opening", {"room": "R", "other_room": "R-2", "kind": "door"}),
    "control": ("control", {"room": "R", "kind": "signage"}),
    "fluid": ("fluid", {"tag": "mix", "lfl_pct": 4.0, **MIXTURE}),
}  # fmt: skip


def stocked(line):
    """Make a site with two rooms and one of everything; the records by their names."""
    line.a_site()
    changes = [
        RecordChange("create", kind, None, {"site": "S", "tag": kind, **fields})
        for kind, fields in STOCK.values()
    ]
    made = line.run(partial(change_several, changes=changes)).items
    return {name: item.record for name, item in zip(STOCK, made, strict=True)}


class Stock:
    def __init__(self, line, records):
        self.line = line
        for name, record in records.items():
            setattr(self, name, record)

    def made(self, record_kind, **fields):
        return self.line.create(record_kind, **{"site": "S", "tag": record_kind, **fields}).record

    def gas_cylinder(self, **fields):
        sort = {"kind": "cylinder", "fluid": "argon", "room": "R", "capacity_l": 50.0}
        return self.made("vessel", **{**sort, "working_pressure_kpa": 20_000.0, **fields})

    def refused(self, record, **fields):
        """The pointers of what is refused; nothing is stored by it."""
        before = self.line.read(get_record, record.kind, record.id)
        with pytest.raises(FieldsRefused) as refused:
            self.line.change(record, **fields)
        assert self.line.read(get_record, record.kind, record.id) == before
        return {bad.pointer for bad in refused.value.errors}


@pytest.fixture(scope="module")
def stock_file(migrated_sqlite_file, tmp_path_factory):
    """A file with a site with two rooms and one of everything, each as it may be; its records."""
    file = tmp_path_factory.mktemp("stock") / "stock.sqlite"
    shutil.copy(migrated_sqlite_file, file)
    with line_on(file) as line:
        records = stocked(line)
    return file, records


@pytest.fixture
def stock(stock_file, tmp_path):
    """A copy of it to change."""
    file, records = stock_file
    with line_on(shutil.copy(file, tmp_path / "stock.sqlite")) as line:
        yield Stock(line, records)


@pytest.fixture(scope="module")
def untouched_stock(stock_file):
    """The same for all tests that change nothing of it."""
    file, records = stock_file
    with line_on(shutil.copy(file, file.with_name("untouched.sqlite"))) as line:
        yield Stock(line, records)


PIPE = {"inspected_on": DAY_AFTER_TOMORROW}
REFUSED = {
    "an outage ends after it begins": (
        "unit", {"outages": [{"from": NOON, "to": NOON}]}, "/outages/0/to",
    ),
    "an outage of a detector ends after it begins": (
        "detector", {"outages": [{"from": NOON, "to": MORNING}]}, "/outages/0/to",
    ),
    "outages do not overlap": (
        "unit",
        {"outages": [{"from": NOON, "to": NIGHT}, {"from": MORNING, "to": EVENING}]},
        "/outages/0",
    ),
    "a hundred outages are enough": (
        "unit",
        {"outages": [
            {"from": f"{year}-01-01T00:00:00Z", "to": f"{year}-01-02T00:00:00Z"}
            for year in range(2027, 2128)
        ]},
        "/outages",
    ),
    "gross holds net": ("vessel", {"gross_l": 29.9}, "/gross_l"),
    "only a magnet quenches": ("vessel", {"quench": {"duration_s": 20.0}}, "/quench"),
    "a boost needs its trigger": ("unit", {"boost_flow_m3_h": 900.0}, "/boost_trigger"),
    "a trigger needs its flow": ("unit", {"boost_trigger": "manual"}, "/boost_flow_m3_h"),
    "no such detector": (
        "unit", {"boost_flow_m3_h": 900.0, "boost_trigger": "nobody"}, "/boost_trigger",
    ),
    "a pit lies in the floor": (
        "room", {"pit": {"area_m2": 30.1, "depth_m": 1.0}}, "/pit/area_m2",
    ),
    "a pit has a depth": ("room", {"pit": {"area_m2": 2.0}}, "/pit/depth_m"),
    "a pit has an area": ("room", {"pit": {"entered": True, "depth_m": 2.0}}, "/pit/area_m2"),
    "a detector hangs below the ceiling": ("detector", {"height_m": 3.06}, "/height_m"),
    "a ceiling is above the detectors": ("room", {"height_m": 0.9}, "/height_m"),
    "an opening is between two rooms": ("opening", {"other_room": "R"}, "/other_room_id"),
    "an opening has a room": ("opening", {"room_id": None}, "/room_id"),
    "a width needs a height": ("opening", {"width_m": 0.9}, "/height_m"),
    "a height needs a width": ("opening", {"height_m": 2.1}, "/width_m"),
    "a free area is at most width times height": (
        "opening", {"width_m": 1.0, "height_m": 2.0, "area_m2": 2.1}, "/area_m2",
    ),
    "a control has one subject": ("control", {"vessel": "V"}, "/room_id"),
    "a control has a subject": ("control", {"room": None}, "/room_id"),
    "a bund has an area": ("control", {"kind": "bund"}, "/area_m2"),
    "a sign has none": ("control", {"area_m2": 2.0}, "/area_m2"),
    "a flammable fluid has its limit": ("fluid", {"lfl_pct": None}, "/lfl_pct"),
    "one that does not burn has none": ("fluid", {"hazards": ["asphyxiant"]}, "/lfl_pct"),
    "a count lies behind": ("vessel", {"counted_at": f"{DAY_AFTER_TOMORROW}T08:00:01Z"},
                            "/counted_at"),
    "a test lies behind": (
        "vessel", {"filling": {"tested_on": DAY_AFTER_TOMORROW}}, "/filling/tested_on",
    ),
    "an inspection lies behind": (
        "vessel", {"relief": {"inspected_on": DAY_AFTER_TOMORROW}}, "/relief/inspected_on",
    ),
    "that of a quench pipe lies behind": (
        "magnet", {"quench": {"pipe": PIPE}}, "/quench/pipe/inspected_on",
    ),
    "a measurement lies behind": (
        "unit",
        {"measured_on": DAY_AFTER_TOMORROW, "measured_flow_m3_h": 500.0},
        "/measured_on",
    ),
    "a tracer test lies behind": (
        "unit", {"mixing_tested_on": DAY_AFTER_TOMORROW}, "/mixing_tested_on",
    ),
    "a calibration lies behind": (
        "detector", {"calibrated_on": DAY_AFTER_TOMORROW}, "/calibrated_on",
    ),
    "a silence began behind": (
        "detector", {"silenced_since": f"{DAY_AFTER_TOMORROW}T08:00:01Z"}, "/silenced_since",
    ),
    "a check lies behind": ("control", {"checked_on": DAY_AFTER_TOMORROW}, "/checked_on"),
}  # fmt: skip


@pytest.mark.parametrize(("record", "fields", "pointer"), REFUSED.values(), ids=REFUSED)
def test_what_cannot_stand_in_a_record_is_refused(untouched_stock, record, fields, pointer):
    assert pointer in untouched_stock.refused(getattr(untouched_stock, record), **fields)


TAKEN = {
    "outages that touch, in any order": (
        "unit", {"outages": [{"from": NOON, "to": EVENING}, {"from": MORNING, "to": NOON}]},
    ),
    "gross as large as net": ("vessel", {"gross_l": 30.0}),
    "a magnet that quenches": ("magnet", {"quench": {"duration_s": 20.0, "pipe": {}}}),
    "a boost by hand": ("unit", {"boost_flow_m3_h": 900.0, "boost_trigger": "manual"}),
    "a boost by a detector": ("unit", {"boost_flow_m3_h": 900.0, "boost_trigger": "DETECTOR"}),
    "a pit as large as the floor": ("room", {"pit": {"area_m2": 30.0, "depth_m": 0.4}}),
    "a detector at the ceiling": ("detector", {"height_m": 3.05}),
    "an opening outdoors": ("opening", {"other_room": None}),
    "the free area of a grille": ("opening", {"width_m": 1.0, "height_m": 0.5, "area_m2": 0.2}),
    "an area alone": ("opening", {"area_m2": 0.2}),
    "a control of a vessel": ("control", {"room": None, "vessel": "V"}),
    "a bund": ("control", {"kind": "bund", "area_m2": 2.5}),
    "a fluid that does not burn": ("fluid", {"hazards": ["asphyxiant"], "lfl_pct": None}),
    "a check of today, where it is tomorrow already": (
        "control", {"checked_on": (TODAY + timedelta(days=1)).isoformat()},
    ),
    "a count a day ahead": ("vessel", {"counted_at": "2027-03-02T08:00:00Z"}),
    "a sealed neck, which is a finding and no slip": ("vessel", {"neck_plug": "sealed"}),
}  # fmt: skip


@pytest.mark.parametrize(("record", "fields"), TAKEN.values(), ids=TAKEN)
def test_what_may_be_is_taken(stock, record, fields):
    assert stock.line.change(getattr(stock, record), **fields).record.revision == 2


@pytest.mark.parametrize("kind", ["cylinder", "dry-ice-box"])
@pytest.mark.parametrize(
    ("field", "value"),
    [("filling", {"by": "attended"}), ("neck_plug", "vented"), ("quench", {}),
     ("rated_evaporation_l_day", 1.0)],
)  # fmt: skip
def test_what_holds_no_liquid_is_not_filled_plugged_or_boiled_off(
    untouched_stock, kind, field, value
):
    sort = {"kind": kind, "fluid": "carbon-dioxide", "capacity_kg": 20.0, "capacity_l": None}
    stock = untouched_stock
    assert stock.refused(stock.vessel, **sort, **{field: value}) == {f"/{field}"}


def test_a_cylinder_is_kept_by_kilograms_or_by_volume_and_pressure(stock):
    cylinder = stock.gas_cylinder(tag="C")
    assert cylinder.fields["capacity_kg"] is None
    for fields, pointer in (
        ({"working_pressure_kpa": None}, "/working_pressure_kpa"),
        ({"working_pressure_kpa": 0.0}, "/working_pressure_kpa"),
        ({"contents_l": 20.0}, "/contents_l"),
        ({"contents_kg": 2.0}, "/contents_kg"),
        ({"measured_loss_kg_day": 0.1}, "/measured_loss_kg_day"),
        ({"use_l_day": 1.0}, "/use_l_day"),
        ({"capacity_kg": 10.0}, "/capacity_l"),
        ({"kind": "dry-ice-box"}, "/capacity_kg"),
    ):
        assert pointer in stock.refused(cylinder, **fields), fields
    weighed = stock.line.change(cylinder, capacity_l=None, capacity_kg=13.0, contents_kg=9.0)
    assert weighed.record.fields["contents_kg"] == 9.0


def test_a_boost_is_kept_by_the_detectors_id(stock):
    boosted = {"boost_flow_m3_h": 900.0, "boost_trigger": stock.detector.id}
    by_id = stock.line.change(stock.unit, **boosted).record
    assert by_id.fields["boost_trigger"] == stock.detector.id
    again = stock.line.change(stock.unit, boost_trigger="Detector")
    assert (again.changed, again.record.fields["boost_trigger"]) == (False, stock.detector.id)


def test_a_boosting_detector_stands_in_a_room_that_the_unit_serves(stock):
    stock.line.change(stock.unit, boost_flow_m3_h=900.0, boost_trigger="detector")
    assert stock.refused(stock.detector, room="R-2") == {"/room_id"}
    elsewhere = [{"room": "R-2", "share": 1.0}]
    assert stock.refused(stock.unit, serves=elsewhere) == {"/boost_trigger"}
    changes = [
        RecordChange("change", "detector", stock.detector.id, {"room": "R-2"}),
        RecordChange("change", "ventilation-unit", stock.unit.id, {"serves": elsewhere}),
    ]
    together = stock.line.run(partial(change_several, changes=changes))
    assert {effect.tag for effect in together.effects} == {"R", "R-2"}


def test_a_detector_that_boosts_cannot_go_before_the_boost(stock):
    unit = stock.line.change(stock.unit, boost_flow_m3_h=900.0, boost_trigger="detector").record
    with pytest.raises(StillReferred, match="ventilation-unit ventilation-unit"):
        stock.line.remove(stock.detector)
    stock.line.change(unit, boost_trigger="manual")
    assert stock.line.remove(stock.detector).removed


def test_a_detector_and_the_unit_it_boosts_are_made_and_go_together(stock):
    new = {"site": "S", "room": "R", "gas": "oxygen", "tag": "D-2"}
    boost = {"boost_flow_m3_h": 900.0, "boost_trigger": "D-2"}
    changes = [
        RecordChange("create", "detector", None, new),
        RecordChange("change", "ventilation-unit", stock.unit.id, boost),
    ]
    detector = stock.line.run(partial(change_several, changes=changes)).items[0].record
    gone = [
        RecordChange("remove", "detector", detector.id, {}),
        RecordChange("remove", "ventilation-unit", stock.unit.id, {}),
    ]
    removed = stock.line.run(partial(change_several, changes=gone)).items
    assert [item.removed for item in removed] == [True, True]


@pytest.mark.slow
def test_objects_are_merged_member_by_member(stock):
    first = {"fitted": True, "set_pressure_kpa": 150.0, "inspected_on": "2027-01-05"}
    stock.line.change(stock.vessel, relief=first, filling={"by": "automatic"})
    merged = stock.line.change(
        stock.vessel, relief={"fitted": False, "inspected_on": None}, filling=None
    ).record
    assert merged.fields["relief"] == {"fitted": False, "set_pressure_kpa": 150.0}
    assert merged.fields["filling"] is None
    pipe = {"pipe": {"bore_mm": 150.0, "outlet_clear": True}}
    stock.line.change(stock.magnet, quench={"duration_s": 20.0, **pipe})
    changed = stock.line.change(stock.magnet, quench={"pipe": {"outlet_clear": False}}).record
    assert changed.fields["quench"] == {
        "duration_s": 20.0, "pipe": {"bore_mm": 150.0, "outlet_clear": False},
    }  # fmt: skip
