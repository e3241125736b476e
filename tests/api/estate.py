"""Builders for tests of the API: who asks, and records with sound defaults."""

from functools import partial

from service.changes.keys import create_key
from service.store.scope import EVERYTHING
from service.store.session import WriteContext

ROLES = ("reader", "recorder", "auditor", "administrator")
BY_TEST = WriteContext(key_id=None, scope=EVERYTHING)


class Asker:
    """Sends requests to a service with the key of a role."""

    def __init__(self, client, app, keys, clock=None):
        self.client = client
        self.app = app
        self.keys = keys
        self.clock = clock

    @classmethod
    def with_new_keys(cls, client, app):
        """Make a key of each role for every site first."""
        ask = cls(client, app, {})
        ask.keys.update({role: ask.key(role) for role in ROLES})
        return ask

    @property
    def service(self):
        return self.app.state.service

    def key(self, role, sites=None, **options):
        """Make a key and return its text."""
        sites = None if sites is None else frozenset(sites)
        job = partial(create_key, holder=f"a {role}", role=role, sites=sites, **options)
        return self.service.writer.run_now(job, BY_TEST)[1]

    def __call__(self, method, path, body=None, *, key="administrator", headers=None, **options):
        """Send a request; the key is a role, the text of a key, or nothing."""
        sent = dict(headers or {})
        if key is not None:
            sent["Authorization"] = f"Bearer {self.keys.get(key, key)}"
        if body is not None:
            options["json"] = body
        return self.client.request(method, path, headers=sent, **options)

    def made(self, path, body, **options):
        """Create a record and return it."""
        answer = self("POST", f"/v1/{path}", body, **options)
        assert answer.status_code == 201, answer.text
        return answer.json()

    def made_at_once(self, records):
        """Create records of some kinds in one request, which is judged once."""
        changes = [{"op": "create", "kind": kind, "fields": fields} for kind, fields in records]
        answer = self("POST", "/v1/changes", {"changes": changes})
        assert answer.status_code == 200, answer.text

    def body(self, path, **options):
        """Read something and return its body."""
        answer = self("GET", path, **options)
        assert answer.status_code == 200, answer.text
        return answer.json()


def a_site(tag="NORTH", **fields):
    return {"tag": tag, "elevation_m": 120.0, "time_zone": "Europe/London", **fields}


def a_room(site, tag="B-104", **fields):
    return {
        "tag": tag,
        "site_id": site["id"],
        "floor_area_m2": 24.0,
        "height_m": 2.8,
        "occupied_fraction": 0.15,
        "egress_m": 6.0,
        **fields,
    }


def a_unit(room, tag="AHU-1", **fields):
    return {
        "tag": tag,
        "arrangement": "exhaust",
        "design_flow_m3_h": 600.0,
        "measured_flow_m3_h": 560.0,
        "measured_on": "2027-01-10",
        "measure_every_days": 365,
        "outdoor_air_fraction": 1.0,
        "serves": [{"room_id": room["id"], "share": 1.0}],
        **fields,
    }


def a_vessel(room, tag="DEW-014", **fields):
    return {
        "tag": tag,
        "room_id": room["id"],
        "fluid": "nitrogen",
        "kind": "open-dewar",
        "capacity_l": 50.0,
        **fields,
    }


def a_vessel_in(site, room_tag, tag, **fields):
    """A vessel in a room that is made with it, and is known by its tag only."""
    vessel = a_vessel({"id": None}, tag, **fields)
    del vessel["room_id"]
    return {**vessel, "room": room_tag, "site_id": site["id"]}


def a_detector(room, tag="OX-1", **fields):
    return {
        "tag": tag,
        "room_id": room["id"],
        "gas": "oxygen",
        "height_m": 1.0,
        "placed": "inside",
        "alarms_pct": [19.5, 18.0],
        "calibrated_on": "2027-01-15",
        "calibrate_every_days": 180,
        "heard_outside": True,
        **fields,
    }


def an_opening(room, tag="DOOR-1", **fields):
    return {
        "tag": tag,
        "room_id": room["id"],
        "kind": "door",
        "width_m": 0.9,
        "height_m": 2.1,
        "net_flow_m3_h": -40.0,
        **fields,
    }


def a_supply_line(room, tag="LINE-1", **fields):
    return {
        "tag": tag,
        "rooms": [{"room_id": room["id"]}],
        "fluid": "nitrogen",
        "phase": "liquid",
        "bore_mm": 10.0,
        "source_pressure_kpa": 300.0,
        "restrictor_kg_h": 60.0,
        "shutoff": {"trigger": "excess-flow", "closes_in_s": 2.0, "fails_closed": True},
        "segments": [{"volume_l": 0.4, "relief": {"fitted": True}}],
        **fields,
    }


def a_control(room, tag="SIGN-1", **fields):
    return {
        "tag": tag,
        "room_id": room["id"],
        "kind": "signage",
        "reference": "drawing A-14",
        "checked_on": "2027-02-01",
        "check_every_days": 365,
        **fields,
    }


class Site:
    """A site with a record of each kind."""

    def __init__(self, ask, tag):
        self.site = ask.made("sites", a_site(tag))
        self.room = ask.made("rooms", a_room(self.site, f"{tag}-104", labels={"wing": tag}))
        self.unit = ask.made("ventilation-units", a_unit(self.room, f"{tag}-AHU"))
        self.vessel = ask.made("vessels", a_vessel(self.room, f"{tag}-DEW", external_id=f"{tag}-X"))
        self.detector = ask.made("detectors", a_detector(self.room, f"{tag}-OX"))
        self.opening = ask.made("openings", an_opening(self.room, f"{tag}-DOOR"))
        # So little comes out of it that the other records decide what is said of the room.
        line = a_supply_line(self.room, f"{tag}-LINE", restrictor_kg_h=0.001)
        self.line = ask.made("supply-lines", line)
        self.control = ask.made("controls", a_control(self.room, f"{tag}-SIGN"))
        self.basis = ask.made(
            "bases",
            {
                "tag": f"{tag}-basis",
                "site_id": self.site["id"],
                "derived_from": "baseline",
                "values": {"restore_s": 1800.0},
                "sources": {"restore_s": "decision of the safety committee"},
            },
        )
        self.fluid = ask.made(
            "fluids",
            {
                "tag": f"{tag}-mix",
                "site_id": self.site["id"],
                "molar_mass_g_mol": 29.0,
                "boiling_k": 80.0,
                "condensed_density_kg_m3": 850.0,
                "oxygen_fraction": 0.1,
                "solid": False,
                "hazards": ["asphyxiant"],
                "settles": "low",
                "sources": {"boiling_k": "data sheet of the supplier"},
            },
        )

    def record(self, kind):
        """Give the record of a kind."""
        return getattr(self, {"ventilation-unit": "unit", "supply-line": "line"}.get(kind, kind))


class Estate:
    """Two sites, and a key of each role for the first alone."""

    def __init__(self, ask):
        self.ask = ask
        self.north = Site(ask, "NORTH")
        self.south = Site(ask, "SOUTH")
        sites = [self.north.site["id"]]
        self.keys = {role: ask.key(role, sites=sites) for role in ROLES}
