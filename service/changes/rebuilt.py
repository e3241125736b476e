"""Rooms as they were: the values of an assessment, made again from the versions it names."""

from __future__ import annotations

from collections.abc import Iterable

import orjson
from sqlalchemy import Connection

from service.audit.inputs import RoomValues
from service.changes.room_values import values_of_rooms
from service.store.history import StoredAssessment, version_of
from service.store.records import Record
from service.store.scope import EVERYTHING


class VersionMissing(LookupError):
    """A version that an assessment rests on is not there; its text says which."""


def records_read(
    connection: Connection, assessments: Iterable[StoredAssessment]
) -> dict[str, Record]:
    """Read the records that assessments of one position rest on, in the revisions they name.

    Who may see an assessment may have what it was made from.

    Raises
    ------
    VersionMissing
        One of them is not there.
    """
    records: dict[str, Record] = {}
    for one in assessments:
        for line in orjson.loads(one.inputs)["read"]:
            if line["id"] in records:
                continue
            record = version_of(EVERYTHING, connection, line["kind"], line["id"], line["revision"])
            if record is None:
                raise VersionMissing(
                    f"{line['kind']} {line['id']} revision {line['revision']}, which the"
                    f" assessment of room {one.room_id} rests on, is not there"
                )
            records[record.id] = record
    return records


def room_of(connection: Connection, assessment: StoredAssessment) -> RoomValues:
    """Make the values again that a room was assessed from.

    Raises
    ------
    VersionMissing
        A version that it rests on is not there.
    """
    records = records_read(connection, [assessment])
    return values_of_rooms(records, [assessment.room_id])[0]
