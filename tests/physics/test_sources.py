import ast
import inspect
import pkgutil
import re
import sys
from importlib import import_module

import pytest

import service.physics
from service.physics.sources import METHODS, SOURCES

CITED = re.compile(r"\[([a-z0-9-]+)\]_")
MODULES = sorted(module.name for module in pkgutil.iter_modules(service.physics.__path__))
# These hold checks, values and names, whose works stand beside the values.
WITHOUT_FORMULAS = {"arrays", "constants", "errors", "fluids", "sources"}
FORMULAS = [name for name in MODULES if name not in WITHOUT_FORMULAS]

WANTED = {
    "mixing/displacement": "C1",
    "mixing/while-displacing": "C2",
    "ventilation/piecewise-constant": "D0, D6",
    "ambient/standard-atmosphere": "B1",
    "marks/oxygen-by-pressure": "B4",
    "gas/ideal-at-site": "A3",
    "boil-off/normal-evaporation": "G1",
    "ventilation/hold": "D",
    "ventilation/restore": "D4",
    "gas/real-gas": "A3",
    "layering/two-zone-bound": "F1",
    "filling/transfer-loss": "G2",
    "filling/overfill": "G2",
    "dry-ice/share-per-hour": "G8",
    "flammable/le-chatelier": "E3",
    "toxic/time-weighted-means": "E1, E2",
    "detectors/first-order-response": "M1",
    "detectors/heights": "M4",
    "egress/margin": "M2",
    "records/due-dates": "N",
    "records/present": "N",
    "records/assumed": "N",
    "records/sound": "N",
    "severity/table": "N",
    "spill/pool-on-floor": "G5",
    "overfill/bund": "G5",
    "line-break/liquid": "G6",
    "line-break/gas": "G6",
    "vacuum-loss/heat-flux": "G3",
    "quench/mean-and-peak": "G7",
    "layering/cold-cloud": "F4, F5",
    "neighbours/network": "L1 to L4",
    "neighbours/door-exchange": "L5",
}


def public_functions(name):
    module = import_module(f"service.physics.{name}")
    return [
        function
        for label, function in inspect.getmembers(module, inspect.isfunction)
        if function.__module__ == module.__name__ and not label.startswith("_")
    ]


def test_values_and_formulas_are_where_they_are_looked_for():
    assert set(MODULES) >= WITHOUT_FORMULAS
    assert {"ambient", "course", "decaying", "evaporation", "gas", "mixing"} <= set(FORMULAS)
    assert {"relaxation", "roots", "ventilation"} <= set(FORMULAS)


@pytest.mark.parametrize("name", FORMULAS)
def test_every_module_of_formulas_cites_a_work_that_is_listed(name):
    assert public_functions(name)
    cited = {key for each in public_functions(name) for key in CITED.findall(each.__doc__)}
    assert cited
    assert cited <= set(SOURCES)


@pytest.mark.parametrize("name", MODULES)
def test_every_citation_is_of_a_work_that_is_listed(name):
    text = inspect.getsource(import_module(f"service.physics.{name}"))
    assert set(CITED.findall(text)) <= set(SOURCES)


@pytest.mark.parametrize("name", FORMULAS)
def test_every_formula_says_what_it_takes_gives_refuses_and_shows(name):
    for function in public_functions(name):
        sections = re.findall(r"^    (\w+)\n    -+$", function.__doc__, re.MULTILINE)
        wanted = ["Parameters", "Returns", "Notes", "Examples"]
        assert [each for each in sections if each != "Raises"] == wanted, function.__name__
        for parameter in inspect.signature(function).parameters:
            assert re.search(rf"\b{parameter}\b.* : ", function.__doc__), parameter


def test_every_work_is_cited_somewhere():
    cited = {key for method in METHODS.values() for key in method.source_keys}
    for name in MODULES:
        cited |= set(CITED.findall(inspect.getsource(import_module(f"service.physics.{name}"))))
    assert set(SOURCES) <= cited


def test_every_method_names_works_that_are_listed():
    assert {slug: METHODS[slug].letter for slug in WANTED} == WANTED
    for slug, method in METHODS.items():
        assert method.slug == slug
        assert method.source_keys
        assert set(method.source_keys) <= set(SOURCES)
        assert re.fullmatch(r"[a-z-]+/[a-z-]+", slug)
        assert method.words.endswith(".")


def test_every_work_is_keyed_by_its_own_key():
    assert all(source.key == key for key, source in SOURCES.items())
    assert {source.status for source in SOURCES.values()} == {"seen", "from memory"}


def test_a_method_that_is_no_estimate_but_a_bound_says_so():
    bounds = {slug for slug, method in METHODS.items() if method.bound}
    assert bounds == {
        "mixing/displacement", "filling/overfill", "layering/two-zone-bound",
        "spill/pool-on-floor", "overfill/bund", "line-break/liquid", "line-break/gas",
        "vacuum-loss/heat-flux", "quench/mean-and-peak", "neighbours/network",
        "neighbours/door-exchange",
    }  # fmt: skip


def test_every_method_says_where_it_holds_and_by_what_formula():
    for slug, method in METHODS.items():
        assert method.letter, slug
        assert method.range, slug
        assert method.formula, slug


@pytest.mark.parametrize("name", MODULES)
def test_physics_depends_on_nothing_but_numpy_and_properties_on_the_library(name):
    tree = ast.parse(inspect.getsource(import_module(f"service.physics.{name}")))
    imported = {
        (node.module if isinstance(node, ast.ImportFrom) else alias.name)
        for node in ast.walk(tree)
        if isinstance(node, ast.Import | ast.ImportFrom)
        for alias in node.names
    }
    allowed = {"numpy", "service"} | ({"CoolProp"} if name == "properties" else set())
    outside = {each.partition(".")[0] for each in imported} - allowed
    assert outside <= sys.stdlib_module_names
    assert not outside & {"os", "pathlib", "logging", "time", "random"}
