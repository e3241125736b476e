"""Records for tests, with sound defaults."""

from datetime import UTC, datetime
from itertools import count

from service.store.ids import new_record_id
from service.store.records import Record
from service.store.rows import field_names
from service.store.scope import EVERYTHING, Scope
from service.store.session import WriteContext

MOMENT = datetime(2027, 3, 1, 8, tzinfo=UTC)
AS_SERVICE = WriteContext(None, EVERYTHING)
_numbers = count(1)

DEFAULTS = {
    "site": {"basis": "baseline", "time_zone": "Europe/Vienna", "demo": False},
    "room": {"kind": "room", "state": "in-service", "volume_m3": 70.0, "volume_derived": False},
    "ventilation-unit": {"state": "running", "serves": []},
    "vessel": {
        "fluid": "nitrogen", "kind": "open-dewar", "state": "in-service", "capacity_l": 50.0,
    },
    "opening": {"kind": "door"},
    "supply-line": {"fluid": "nitrogen", "phase": "liquid", "rooms": []},
    "detector": {"gas": "oxygen", "state": "in-service", "alarms_pct": [19.5, 18.0]},
    "control": {"kind": "signage"},
    "basis": {"values": {"oxygen_deficient_pct": 19.5}, "sources": {"oxygen_deficient_pct": "—"}},
    "fluid": {
        "molar_mass_g_mol": 28.0134, "boiling_k": 77.355, "condensed_density_kg_m3": 806.1,
        "oxygen_fraction": 0.0, "solid": False, "hazards": ["asphyxiant"], "settles": "low",
        "sources": {},
    },
}  # fmt: skip


def a_record(kind, site_id, /, **given):
    """Make a record of any kind; the fields that are not given have a default or nothing."""
    number = next(_numbers)
    record_id = given.pop("id", None) or new_record_id(MOMENT)
    heading = {"revision": 1, "created_at": MOMENT, "updated_at": MOMENT}
    heading |= {name: given.pop(name) for name in heading if name in given}
    fields = dict.fromkeys(field_names(kind))
    fields |= {"tag": f"{kind}-{number}", "labels": {}} | DEFAULTS[kind] | given
    own_site = record_id if kind == "site" else site_id
    return Record(kind=kind, id=record_id, site_id=own_site, fields=fields, **heading)


class Estate:
    """A site with one record of each kind, as records not yet stored."""

    def __init__(self, shared, **site):
        self.site = a_record("site", None, basis_id=shared.basis.id, **site)
        site_id = self.site.id
        self.room = a_record(
            "room",
            site_id,
            purge_fluid_id=shared.fluid.id,
            purge_fluid="n",
            people={"attended": 2, "most": None},
            labels={"wing": "B"},
        )
        self.opening = a_record("opening", site_id, room_id=self.room.id, net_flow_m3_h=-12.5)
        self.detector = a_record(
            "detector",
            site_id,
            room_id=self.room.id,
            external_id="D/1",
            silenced_since="2027-02-01T00:00:00.000000Z",
            outages=[{"from": "2027-04-01T06:00:00.000000Z", "to": "2027-04-01T09:00:00.000000Z"}],
        )
        self.unit = a_record(
            "ventilation-unit",
            site_id,
            measured_on="2027-01-31",
            measure_every_days=365,
            design_flow_m3_h=600.0,
            flow_proved=True,
            serves=[{"room_id": self.room.id, "share": 0.75}],
            boost_flow_m3_h=900.0,
            boost_trigger=self.detector.id,
        )
        self.vessel = a_record(
            "vessel",
            site_id,
            room_id=self.room.id,
            fluid_id=shared.fluid.id,
            counted_at="2027-02-28T23:59:59.000001Z",
            contents_l=12.5,
            filling={"by": None},
            mobile=False,
            name="Dewar Ä",
            notes="a\nb",
        )
        self.line = a_record(
            "supply-line",
            site_id,
            source_vessel_id=self.vessel.id,
            fluid_id=shared.fluid.id,
            rooms=[{"room_id": self.room.id}],
            bore_mm=12.5,
            shutoff={"trigger": self.detector.id, "closes_in_s": 2.0},
            segments=[{"volume_l": 0.5, "relief": {"fitted": True}}],
        )
        self.control = a_record(
            "control", site_id, vessel_id=self.vessel.id, kind="bund", area_m2=2.5
        )
        self.basis = a_record(
            "basis", site_id, derived_from_id=shared.basis.id, derived_from="baseline"
        )
        self.fluid = a_record("fluid", site_id, settles="methane", hazards=["flammable"])

    @property
    def records(self):
        return [
            self.site, self.room, self.opening, self.detector, self.unit, self.vessel, self.line,
            self.control, self.basis, self.fluid,
        ]  # fmt: skip

    @property
    def scope(self):
        return Scope("key", "reader", frozenset({self.site.id}))


class Shared:
    """What comes with the service."""

    def __init__(self):
        self.basis = a_record("basis", None, tag="baseline")
        self.fluid = a_record("fluid", None, tag="nitrogen")

    @property
    def records(self):
        return [self.basis, self.fluid]
