"""Methods and rules in words: everything that an answer may name can be read."""

import pytest

from service.api.routes import methods as route
from service.api.schemas.methods import MethodsRead, RulesRead
from service.audit.hazards import HAZARDS
from service.audit.releases import RELEASES
from service.audit.rules.described import described_rules
from service.audit.rules.registry import RULES
from service.audit.told_cases import methods
from service.physics.sources import METHODS, SOURCES


def test_every_method_that_a_rule_or_a_case_names_is_there():
    named = {rule.method for rule in RULES}
    for release in RELEASES:
        for hazard in range(len(HAZARDS)):
            for at_once in (True, False):
                for pushes in (True, False):
                    named |= set(methods(release, hazard, at_once=at_once, pushes=pushes))
    assert named <= set(METHODS)


def test_every_source_of_a_method_is_told_in_full():
    for method in METHODS.values():
        assert method.source_keys
        assert set(method.source_keys) <= set(SOURCES)


def test_every_rule_is_described_once_with_all_its_gases():
    described = {rule.slug: rule for rule in described_rules()}
    assert set(described) == {rule.slug for rule in RULES}
    assert described["toxic/boil-off"].gases == ("carbon-dioxide", "nitrous-oxide")
    for rule in described.values():
        assert rule.looks_for.endswith(".")
        assert rule.sources


@pytest.mark.parametrize(
    ("path", "model"), [("/v1/methods", MethodsRead), ("/v1/rules", RulesRead)]
)
def test_a_list_is_answered_whole_to_any_role_and_then_not_again(ask_one, path, model):
    for role in ("reader", "recorder", "auditor", "administrator"):
        answer = ask_one("GET", path, key=role)
        assert answer.status_code == 200
        model.model_validate(answer.json())
    tag = {"If-None-Match": answer.headers["etag"]}
    assert ask_one("GET", path, headers=tag).status_code == 304
    assert ask_one("GET", path, key=None).status_code == 401
    for item in answer.json()["items"]:
        assert ask_one.body(f"{path}/{item['slug']}") == item


def test_a_finding_leads_to_its_rule_its_method_and_their_sources(ask_one, estate_of_one):
    finding = ask_one.body("/v1/findings?limit=1")["items"][0]
    rule = ask_one.body(f"/v1/rules/{finding['rule']}")
    assert rule["method"] == finding["method"]
    assert finding["source"] in rule["sources"]
    method = ask_one.body(rule["method_path"])
    assert method["slug"] == rule["method"]
    assert all(source["title"] for source in method["sources"])


def test_the_link_of_every_rule_leads_to_the_method_that_it_names(ask_one):
    rules = ask_one.body("/v1/rules")["items"]
    methods = {method["slug"]: method for method in ask_one.body("/v1/methods")["items"]}
    assert {rule["slug"] for rule in rules} == {rule.slug for rule in RULES}
    for path, slug in {rule["method_path"]: rule["method"] for rule in rules}.items():
        assert ask_one.body(path) == methods[slug]


@pytest.mark.parametrize(
    "path",
    [
        "/v1/methods",
        "/v1/rules",
        "/v1/methods/mixing/displacement",
        "/v1/rules/oxygen/largest-vessel",
    ],
)
def test_another_version_of_the_method_is_answered_anew(ask_one, monkeypatch, path):
    tag = {"If-None-Match": ask_one("GET", path).headers["etag"]}
    assert ask_one("GET", path, headers=tag).status_code == 304
    monkeypatch.setattr(route, "METHOD_VERSION", f"{route.METHOD_VERSION}-next")
    again = ask_one("GET", path, headers=tag)
    assert again.status_code == 200
    assert again.headers["etag"] != tag["If-None-Match"]


@pytest.mark.parametrize("path", ["/v1/methods/no/such", "/v1/rules/no/such"])
def test_what_is_not_there_is_said_so(ask_one, path):
    answer = ask_one("GET", path)
    assert answer.status_code == 404
    assert answer.headers["content-type"].startswith("application/problem+json")
