import re

import pytest

import service.errors as tree
from service.errors import (
    Conflict,
    DuplicateTag,
    FieldError,
    FieldsRefused,
    KeyMissing,
    RevisionMoved,
    RimewardError,
    StillReferred,
    every_problem,
)

EVERY = every_problem()


def test_the_docstring_draws_every_error_with_its_status():
    drawn = dict(re.findall(r"[├└]── ([A-Z]\w+) +(\d{3})?", tree.__doc__))
    assert set(drawn) == {kind.__name__ for kind in EVERY}
    for kind in EVERY:
        assert drawn[kind.__name__] in ("", str(kind.status))
    assert all(issubclass(kind, Conflict) == (kind.status == 409) for kind in EVERY)


def test_every_problem_has_a_slug_of_its_own():
    assert len({kind.type for kind in EVERY}) == len(EVERY)
    assert all(re.fullmatch(r"[a-z]+(-[a-z]+)*", kind.type) for kind in EVERY)


@pytest.mark.parametrize("kind", EVERY, ids=lambda kind: kind.type)
def test_every_error_has_a_client_or_server_status_a_title_and_a_docstring(kind):
    assert 400 <= kind.status < 600
    assert kind.title
    assert not kind.title.endswith(".")
    assert kind.__doc__
    assert kind.uri() == f"/docs/problems#{kind.type}"


def test_an_error_without_a_detail_says_its_title():
    assert Conflict().detail == "What is there stands against it."
    assert str(Conflict("Busy with another.")) == "Busy with another."


def test_the_detail_names_the_first_field_and_counts_the_others():
    errors = [FieldError(f"/{name}", "required", "This is required.") for name in "abc"]
    assert FieldsRefused(errors=errors[:1]).detail == "/a: This is required."
    assert FieldsRefused(errors=errors).detail == "/a: This is required. And 2 more."


def test_a_parameter_is_named_and_not_pointed_to():
    error = FieldsRefused.parameter("limit", "out-of-range", "It must be at most 500.")
    assert error.errors[0].parameter == "limit"
    assert error.detail.startswith("limit: ")


def test_a_moved_revision_answers_the_present_tag():
    assert RevisionMoved(7).headers == {"ETag": '"7"'}


def test_a_missing_key_says_how_to_send_one():
    assert KeyMissing().headers["WWW-Authenticate"].startswith("Bearer")


def test_a_refused_removal_names_what_refers_but_not_without_end():
    error = StillReferred.by(f"vessel D-{number}" for number in range(25))
    assert "vessel D-0" in error.detail
    assert error.detail.endswith("and 5 more.")
    assert len(error.errors) == 20


def test_a_taken_tag_is_told_at_the_tag():
    assert DuplicateTag("vessel").errors[0].pointer == "/tag"


def test_the_headers_of_an_error_cannot_be_changed():
    with pytest.raises(TypeError):
        RimewardError(headers={"A": "b"}).headers["A"] = "c"
