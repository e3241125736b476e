"""The whole service, as the tests of the API start it."""

from tests.api.conftest import (
    ask,
    ask_one,
    copied_estate,
    estate,
    estate_in_a_file,
    estate_on_postgresql,
    estate_on_sqlite,
    postgresql_estate,
    serve,
    started,
)

__all__ = [
    "ask",
    "ask_one",
    "copied_estate",
    "estate",
    "estate_in_a_file",
    "estate_on_postgresql",
    "estate_on_sqlite",
    "postgresql_estate",
    "serve",
    "started",
]
