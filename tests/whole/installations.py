"""A whole service on a database of its own, asked over HTTP as its users ask it."""

import re
from contextlib import contextmanager
from datetime import UTC, datetime, timedelta

from starlette.testclient import TestClient

from service.app import create_app
from service.changes.keys import create_key
from service.changes.verify import verify
from service.clock import FixedClock, text_of
from service.settings import Settings
from service.store.scope import EVERYTHING
from service.store.session import WriteContext
from service.work.clock import run_clock_once
from service.work.sweep import run_sweep_once

MOMENT = datetime(2027, 3, 1, 8, tzinfo=UTC)
ITSELF = WriteContext(key_id=None, scope=EVERYTHING)
_ID = re.compile(r"[0-9a-f]{8}-[0-9a-f]{4}-7[0-9a-f]{3}-[0-9a-f]{4}-[0-9a-f]{12}")


class Installation:
    """One running service, its clock, and an administrator's key to it."""

    def __init__(self, app, client, clock):
        self.app, self.client, self.clock = app, client, clock
        _, self.key = self.write(
            lambda session: create_key(
                session, holder="tests", role="administrator", sites=None, expires_at=None
            )
        )

    @property
    def service(self):
        return self.app.state.service

    def write(self, job):
        return self.service.writer.run_now(job, ITSELF)

    def ask(self, method, path, body=None, **headers):
        answer = self.client.request(
            method,
            f"/v1{path}",
            json=body,
            headers={"Authorization": f"Bearer {self.key}"}
            | {name.replace("_", "-"): value for name, value in headers.items()},
        )
        assert answer.status_code < 500, (method, path, body, answer.text)
        return answer

    def done(self, method, path, body=None, **headers):
        """Ask for something that must be done, and give its answer."""
        answer = self.ask(method, path, body, **headers)
        assert answer.is_success, (method, path, body, answer.text)
        return answer.json()

    def status(self, room_id, moment=None):
        path = f"/rooms/{room_id}/status"
        if moment is not None:
            path += f"?as_of={text_of(moment)}"
        return self.ask("GET", path)

    def run_clock(self):
        service = self.service
        return self.client.portal.call(run_clock_once, service.writer, service.database, self.clock)

    def run_sweep(self):
        service = self.service
        return self.client.portal.call(run_sweep_once, service.writer, service.database, 2)

    def verified(self):
        return verify(self.service.database)

    def pass_time(self, by=timedelta(milliseconds=1)):
        return self.clock.advance(by)


@contextmanager
def installation(database_url, *, moment=MOMENT, **settings):
    """Run a service on a migrated database for a block; its jobs run when they are asked to."""
    clock = FixedClock(moment)
    still = timedelta(0)
    chosen = Settings(
        database_url=database_url, clock_every=still, sweep_every=still, demo=False, **settings
    )
    app = create_app(chosen, clock=clock)
    with TestClient(app, base_url="http://127.0.0.1") as client:
        yield Installation(app, client, clock)


def without_ids(text):
    """Write what was answered with every id alike, to compare two installations."""
    return _ID.sub("id", text)
