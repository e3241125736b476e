"""Random histories through HTTP, on both databases at once, held against what must always hold."""

import shutil
from contextlib import ExitStack
from datetime import timedelta

import pytest
from hypothesis import HealthCheck, Phase, settings
from hypothesis import strategies as st
from hypothesis.stateful import (
    Bundle,
    RuleBasedStateMachine,
    consumes,
    initialize,
    invariant,
    multiple,
    precondition,
    rule,
    run_state_machine_as_test,
)

from tests.databases import TEMPLATE
from tests.whole.installations import installation, without_ids

FLUIDS = st.sampled_from(["nitrogen", "argon", "helium", "oxygen", "neon"])
KINDS = st.sampled_from(["open-dewar", "pressurised-dewar", "freezer", "cryostat", "tank"])
VOLUMES = st.floats(4.0, 900.0).map(lambda value: round(value, 3))
LITRES = st.floats(0.5, 400.0).map(lambda value: round(value, 2))
FLOWS = st.floats(0.0, 3000.0).map(lambda value: round(value, 1))
MAYBE = st.sampled_from([None, True, False])
DAYS = st.sampled_from([None, "2026-11-01", "2027-02-20"])
WAITS = st.sampled_from(
    [timedelta(seconds=1), timedelta(hours=5), timedelta(days=3), timedelta(days=170)]
)


class Histories(RuleBasedStateMachine):
    """Two installations that are told the same: one on SQLite, one on PostgreSQL."""

    rooms = Bundle("rooms")
    vessels = Bundle("vessels")
    units = Bundle("units")
    detectors = Bundle("detectors")
    controls = Bundle("controls")

    #: Addresses of two fresh databases; set by the test.
    fresh = None

    def __init__(self):
        super().__init__()
        self.open = ExitStack()
        urls = self.open.enter_context(type(self).fresh())
        # Two rooms at most with a change: a third makes a basis edit a matter for the sweep.
        self.both = [self.open.enter_context(installation(url, rooms_per_change=2)) for url in urls]
        self.ids = {}
        self.live_rooms = []
        self.controlled = {}
        self.told = []
        self.made = 0

    def teardown(self):
        try:
            self.the_past_is_answered_as_it_was()
            self.everything_stored_follows_from_its_records()
        finally:
            self.open.close()

    # Telling both the same.

    def tag(self, kind):
        self.made += 1
        return f"{kind}-{self.made}"

    def path(self, number, kind, tag):
        return f"/{kind}/{self.ids[number, tag]}"

    def create(self, kind, tag, fields):
        """Create a record on both, with references by tag, and compare the answers."""
        answers = []
        for number, one in enumerate(self.both):
            one.pass_time()
            made = one.done("POST", f"/{kind}", {"tag": tag, "site": "S", **fields})
            self.ids[number, tag] = made["id"]
            answers.append(without_ids(str(made)))
        assert answers[0] == answers[1]

    def change(self, kind, tag, fields):
        """Change a record on both; either both take it or both refuse it for the same reason."""
        answers = []
        for number, one in enumerate(self.both):
            one.pass_time()
            answer = one.ask("PATCH", self.path(number, kind, tag), fields)
            shown = {k: v for k, v in answer.json().items() if k != "instance"}
            answers.append((answer.status_code, without_ids(str(shown))))
        assert answers[0] == answers[1]
        return answers[0][0]

    def remove(self, kind, tag):
        codes = []
        for number, one in enumerate(self.both):
            one.pass_time()
            codes.append(one.ask("DELETE", self.path(number, kind, tag)).status_code)
        assert codes[0] == codes[1]
        return codes[0] == 200

    # What happens.

    @initialize(elevation=st.sampled_from([0.0, 640.0, 1700.0, 3000.0]))
    def begin(self, elevation):
        for number, one in enumerate(self.both):
            site = {"tag": "S", "elevation_m": elevation, "time_zone": "Europe/Madrid"}
            self.ids[number, "S"] = one.done("POST", "/sites", site)["id"]
        self.create("bases", "own", {"derived_from": "baseline", "values": {}})
        for number, one in enumerate(self.both):
            one.done("PATCH", self.path(number, "sites", "S"), {"basis": "own"})

    @rule(target=rooms, volume=VOLUMES, below=MAYBE, occupied=st.sampled_from([None, 0.1, 0.4]))
    def add_room(self, volume, below, occupied):
        tag = self.tag("room")
        fields = {"volume_m3": volume, "below_ground": below, "occupied_fraction": occupied}
        self.create("rooms", tag, fields)
        self.live_rooms.append(tag)
        return tag

    @rule(target=vessels, room=rooms, fluid=FLUIDS, kind=KINDS, capacity=LITRES)
    def add_vessel(self, room, fluid, kind, capacity):
        tag = self.tag("vessel")
        fields = {"room": room, "fluid": fluid, "kind": kind, "capacity_l": capacity}
        self.create("vessels", tag, fields)
        return tag

    @rule(
        target=units,
        room=rooms,
        flow=FLOWS,
        arrangement=st.sampled_from([None, "supply", "exhaust", "balanced"]),
        standby=MAYBE,
    )
    def add_unit(self, room, flow, arrangement, standby):
        tag = self.tag("unit")
        fields = {
            "arrangement": arrangement,
            "design_flow_m3_h": flow + 100.0,
            "measured_flow_m3_h": flow,
            "measured_on": "2027-01-10",
            "measure_every_days": 90,
            "standby_power": standby,
            "serves": [{"room": room, "share": 0.8}],
        }
        self.create("ventilation-units", tag, fields)
        return tag

    @rule(target=detectors, room=rooms, height=st.sampled_from([None, 0.4, 1.2, 2.4]))
    def add_detector(self, room, height):
        tag = self.tag("detector")
        fields = {
            "room": room,
            "gas": "oxygen",
            "height_m": height,
            "alarms_pct": [19.5, 18.0],
            "calibrated_on": "2026-12-20",
            "calibrate_every_days": 180,
            "heard_outside": True,
        }
        self.create("detectors", tag, fields)
        return tag

    @rule(vessel=vessels, room=st.none() | rooms)
    def move_vessel(self, vessel, room):
        self.change("vessels", vessel, {"room": room})

    @rule(vessel=vessels, share=st.sampled_from([0.0, 0.35, 1.0, 1.1, 1.3]), capacity=LITRES)
    def fill_vessel(self, vessel, share, capacity):
        code = self.change(
            "vessels", vessel, {"capacity_l": capacity, "contents_l": share * capacity}
        )
        assert code == (422 if share > 1.2 else 200)

    @rule(vessel=vessels, state=st.sampled_from(["in-service", "empty", "withdrawn"]))
    def set_vessel(self, vessel, state):
        self.change("vessels", vessel, {"state": state, "filling": {"by": "exchanged"}})

    @rule(unit=units, state=st.sampled_from(["running", "stopped", "failed"]))
    def report_fan(self, unit, state):
        self.change("ventilation-units", unit, {"state": state})

    @rule(detector=detectors, state=st.sampled_from(["in-service", "fault", "off"]))
    def report_detector(self, detector, state):
        self.change("detectors", detector, {"state": state})

    @rule(target=vessels, vessel=consumes(vessels))
    def remove_vessel(self, vessel):
        """One that a control names stays."""
        removed = self.remove("vessels", vessel)
        assert removed == (vessel not in self.controlled.values())
        return multiple() if removed else vessel

    @rule(target=controls, vessel=vessels, on=DAYS)
    def control_vessel(self, vessel, on):
        tag = self.tag("control")
        fields = {"vessel": vessel, "kind": "bund", "area_m2": 1.5, "checked_on": on}
        self.create("controls", tag, fields | {"check_every_days": 90})
        self.controlled[tag] = vessel
        return tag

    @rule(control=controls, room=rooms)
    def give_control_to_room(self, control, room):
        fields = {"vessel": None, "room": room, "kind": "training", "area_m2": None}
        assert self.change("controls", control, fields) == 200
        self.controlled[control] = None

    @rule(control=consumes(controls))
    def remove_control(self, control):
        assert self.remove("controls", control)
        del self.controlled[control]

    @rule(room=rooms, other=st.none() | rooms, flow=st.floats(-100.0, 100.0))
    def add_opening(self, room, other, flow):
        if room != other:
            fields = {"room": room, "other_room": other, "kind": "door", "net_flow_m3_h": flow}
            self.create("openings", self.tag("opening"), fields)

    @rule(unit=units, day=st.sampled_from(["2027-03-02", "2027-03-09", "2027-06-01"]))
    def plan_outage(self, unit, day):
        outage = {"from": f"{day}T06:00:00Z", "to": f"{day}T16:00:00Z", "reason": "filters"}
        self.change("ventilation-units", unit, {"outages": [outage]})

    @rule(unit=units, trigger=st.just("manual") | detectors)
    def boost_unit(self, unit, trigger):
        """Refused where the detector stands elsewhere."""
        boost = {"boost_flow_m3_h": 1200.0, "boost_trigger": trigger}
        assert self.change("ventilation-units", unit, boost) in (200, 422)

    @rule(vessel=vessels, relief=MAYBE, plug=st.sampled_from([None, "vented", "sealed"]))
    def look_after_vessel(self, vessel, relief, plug):
        fields = {"relief": {"fitted": relief, "inspected_on": "2027-01-10"}, "neck_plug": plug}
        assert self.change("vessels", vessel, fields) == 200

    @rule(target=rooms, room=consumes(rooms))
    def remove_room(self, room):
        if self.remove("rooms", room):
            self.live_rooms.remove(room)
            return multiple()
        return room

    @rule(
        factor=st.sampled_from([1.0, 2.0, 5.0]), contents=st.sampled_from(["capacity", "recorded"])
    )
    def edit_basis(self, factor, contents):
        own = {"mixing_factor": factor, "contents": contents}
        fields = {"values": own, "sources": dict.fromkeys(own, "agreed with the safety officer")}
        self.change("bases", "own", fields)

    @rule(rooms_volume=VOLUMES, elevation=st.sampled_from([0.0, 900.0]))
    def change_several(self, rooms_volume, elevation):
        if not self.live_rooms:
            return
        room = self.live_rooms[0]
        for number, one in enumerate(self.both):
            one.pass_time()
            changes = [
                {
                    "op": "change",
                    "kind": "room",
                    "id": self.ids[number, room],
                    "fields": {"volume_m3": rooms_volume},
                },
                {
                    "op": "change",
                    "kind": "site",
                    "id": self.ids[number, "S"],
                    "fields": {"elevation_m": elevation},
                },
            ]
            one.done("POST", "/changes", {"changes": changes})

    @rule(by=WAITS, run=st.booleans())
    def let_time_pass(self, by, run):
        for one in self.both:
            one.pass_time(by)
        if run:
            self.run_clock()

    @rule()
    def run_clock(self):
        counted = []
        for one in self.both:
            one.pass_time()
            counted.append(one.run_clock())
        assert counted[0] == counted[1]

    @rule()
    def sweep(self):
        counted = []
        for one in self.both:
            one.pass_time()
            counted.append(one.run_sweep())
            assert one.run_sweep() == 0
        assert counted[0] == counted[1]

    # What must always hold.

    @invariant()
    def both_answer_the_same(self):
        for one in self.both:
            # Several changes of one moment are recorded a microsecond apart: past them all.
            one.pass_time()
        for room in self.live_rooms:
            bodies = []
            for number, one in enumerate(self.both):
                answer = one.status(self.ids[number, room])
                assert answer.status_code == 200
                self.told.append((number, room, one.clock.now(), answer.content))
                bodies.append(without_ids(answer.text))
            assert bodies[0] == bodies[1]

    @precondition(lambda self: len(self.told) > 30)
    @rule()
    def look_back(self):
        self.the_past_is_answered_as_it_was()

    def the_past_is_answered_as_it_was(self):
        for one in self.both:
            one.pass_time()
        for number, room, moment, body in self.told[-60:]:
            again = self.both[number].status(self.ids[number, room], moment)
            assert again.content == body, (room, moment)

    def everything_stored_follows_from_its_records(self):
        for one in self.both:
            report = one.verified()
            assert report.sound, report.faults[:5]
            assert report.changes > 0


@pytest.fixture
def two_databases(tmp_path_factory, migrated_sqlite_file, postgresql_cluster):
    """Give a way to open two fresh databases, one of each kind."""

    def fresh():
        stack = ExitStack()
        file = tmp_path_factory.mktemp("history") / "rimeward.sqlite"
        shutil.copy(migrated_sqlite_file, file)
        url = stack.enter_context(postgresql_cluster.copy_of(TEMPLATE))
        return _both(stack, (f"sqlite:///{file}", url))

    return fresh


class _both:  # noqa: N801 -- a context manager, read as a verb where it is used
    def __init__(self, stack, urls):
        self.stack, self.urls = stack, urls

    def __enter__(self):
        return self.urls

    def __exit__(self, *error):
        self.stack.close()


def _histories(two_databases, examples, steps):
    machine = type("HistoriesHere", (Histories,), {"fresh": staticmethod(two_databases)})
    run_state_machine_as_test(
        machine,
        settings=settings(
            max_examples=examples,
            stateful_step_count=steps,
            deadline=None,
            print_blob=True,
            # A history that fails is told whole; to shorten it takes longer than to read it.
            phases=[Phase.explicit, Phase.reuse, Phase.generate],
            suppress_health_check=list(HealthCheck),
        ),
    )


@pytest.mark.postgresql
def test_short_histories_are_kept_and_answered_alike_on_both_databases(two_databases):
    _histories(two_databases, examples=3, steps=10)


@pytest.mark.slow
@pytest.mark.postgresql
def test_histories_are_kept_and_answered_alike_on_both_databases(two_databases):
    _histories(two_databases, examples=12, steps=25)


@pytest.mark.long
@pytest.mark.postgresql
def test_long_histories_are_kept_and_answered_alike_on_both_databases(two_databases):
    _histories(two_databases, examples=100, steps=60)
