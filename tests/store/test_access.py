from dataclasses import replace
from datetime import timedelta

import pytest
import sqlalchemy as sa

from service.store.answers import StoredAnswer, drop_old_answers, find_answer, keep_answer
from service.store.installation import (
    ensure_installation,
    installation_of,
    renew_lineage,
    revise_method_version,
)
from service.store.keys import (
    Key,
    add_key,
    get_key,
    key_by_digest,
    list_keys,
    note_use,
    replace_key,
    revoke_key,
)
from service.store.scope import EVERYTHING, Scope
from tests.store.estate import MOMENT


def a_key(number, **changes):
    return Key(**{
        "id": f"k{number}", "prefix": f"p{number}", "digest": f"{number:064}", "holder": "Ada",
        "role": "reader", "sites": None, "created_at": MOMENT,
    } | changes)  # fmt: skip


def test_keys_are_found_by_digest_and_listed(database, write):
    keys = [a_key(1), a_key(2, sites=frozenset({"a", "b"})), a_key(3, sites=frozenset())]
    for key in keys:
        write(lambda s, key=key: add_key(s, key))
    with database.reading() as connection:
        assert key_by_digest(EVERYTHING, connection, keys[1].digest) == keys[1]
        assert key_by_digest(EVERYTHING, connection, "0") is None
        assert list_keys(EVERYTHING, connection) == keys


def test_an_administrator_of_some_sites_sees_no_key_that_reaches_further(database, write):
    everywhere, here, further = (
        a_key(1),
        a_key(2, sites=frozenset("a")),
        a_key(3, sites=frozenset("ab")),
    )
    for key in (everywhere, here, further):
        write(lambda s, key=key: add_key(s, key))
    with database.reading() as connection:
        scope = Scope("k", "administrator", frozenset({"a"}))
        assert list_keys(scope, connection) == [here]
        assert get_key(scope, connection, "k3") is None
        assert key_by_digest(scope, connection, everywhere.digest) is None


def test_a_key_is_revoked_once_replaced_and_its_use_noted(database, write, clock):
    write(lambda s: add_key(s, a_key(1)))
    write(lambda s: add_key(s, a_key(2)))
    until = MOMENT + timedelta(days=1)
    assert write(lambda s: replace_key(s, "k2", "k1", until))
    assert write(lambda s: revoke_key(s, "k1"))
    assert not write(lambda s: revoke_key(s, "k1"))
    assert not write(lambda s: replace_key(s, "k1", "k2", until))
    write(lambda s: note_use(s, "k2", MOMENT))
    with database.reading() as connection:
        assert get_key(EVERYTHING, connection, "k1").revoked_at == clock.now()
        assert get_key(EVERYTHING, connection, "k2") == a_key(
            2, replaced_by="k1", expires_at=until, last_used_at=MOMENT
        )


@pytest.mark.parametrize("changes", [{"digest": f"{1:064}"}, {"prefix": "p1"}, {"role": "owner"}])
def test_a_key_has_a_digest_and_prefix_of_its_own_and_a_known_role(write, changes):
    write(lambda s: add_key(s, a_key(1)))
    with pytest.raises(sa.exc.IntegrityError):
        write(lambda s: add_key(s, a_key(2, **changes)))


def test_an_answer_is_kept_by_key_path_and_token_until_it_is_old(write):
    kept = StoredAnswer("key", "/v1/vessels", "token", "print", 201, {"ETag": '"1"'},
                        b'{"b":1.00}', MOMENT)  # fmt: skip
    write(lambda s: keep_answer(s, kept))
    secret = replace(kept, path="/v1/keys", body=None)
    write(lambda s: keep_answer(s, secret))
    assert write(lambda s: find_answer(s, "key", "/v1/vessels", "token")) == kept
    assert write(lambda s: find_answer(s, "key", "/v1/keys", "token")) == secret
    for asked in (("k", "/v1/vessels", "token"), ("key", "/v1/rooms", "token"),
                  ("key", "/v1/vessels", "")):  # fmt: skip
        assert write(lambda s, asked=asked: find_answer(s, *asked)) is None
    with pytest.raises(sa.exc.IntegrityError):
        write(lambda s: keep_answer(s, kept))
    assert write(lambda s: drop_old_answers(s, MOMENT)) == 0
    assert write(lambda s: drop_old_answers(s, MOMENT + timedelta(microseconds=1))) == 2


def test_the_installation_is_made_once(database, write):
    with database.reading() as connection:
        assert installation_of(EVERYTHING, connection) is None
    first = write(lambda s: ensure_installation(s, "1"))
    assert write(lambda s: ensure_installation(s, "2")) == first
    assert (len(first.secret), first.method_version) == (32, "1")
    write(lambda s: revise_method_version(s, "2"))
    lineage = write(renew_lineage)
    with database.reading() as connection:
        found = installation_of(EVERYTHING, connection)
    assert found == replace(first, method_version="2", lineage=lineage)
    assert lineage != first.lineage
    with pytest.raises(sa.exc.IntegrityError), database.writing() as connection:
        connection.exec_driver_sql(
            "INSERT INTO installation SELECT 'x', singleton, lineage, secret, method_version,"
            " created_at FROM installation"
        )
