"""Imports run one way: app → core, and in core from the workspace down to physics; only the Dash layer knows Dash."""

import ast
import graphlib
import sys
import tomllib
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]


def modules(room):
    return {
        ".".join(path.relative_to(ROOT).with_suffix("").parts).removesuffix(".__init__"): path
        for path in sorted((ROOT / room).rglob("*.py"))
    }


CORE, APP = modules("core"), modules("app")
WEB = {"dash", "plotly", "flask", "werkzeug", "waitress", "dash_ag_grid"}


class Imports(ast.NodeVisitor):
    """Full names of everything a module imports when it is run; what only type checkers read does not count."""

    def __init__(self, name, path):
        self.package = name if path.stem == "__init__" else name.rpartition(".")[0]
        self.names = set()
        self.visit(ast.parse(path.read_text(encoding="utf-8")))

    def visit_If(self, node):
        if getattr(node.test, "id", "") != "TYPE_CHECKING":
            self.generic_visit(node)

    def visit_Import(self, node):
        self.names |= {alias.name for alias in node.names}

    def visit_ImportFrom(self, node):
        above = self.package.split(".")[: len(self.package.split(".")) - node.level + 1] if node.level else []
        source = ".".join([*above, *([node.module] if node.module else [])])
        members = {f"{source}.{alias.name}" for alias in node.names}
        self.names |= {name if name in CORE or name in APP else source for name in members}


IMPORTS = {name: Imports(name, path).names for name, path in {**CORE, **APP}.items()}


def own(name):
    """The project's own modules that a module imports."""
    return {found for found in IMPORTS[name] if found in IMPORTS and found != name}


def tops(name):
    return {found.partition(".")[0] for found in IMPORTS[name]}


def test_the_walk_sees_imports_of_every_kind():
    assert {"core.errors", "dash", "logging"} <= IMPORTS["app.server"]  # from x import y; import x
    assert "app.live" in own("app.server")  # from . import live
    assert "core.errors" in own("core.reading")  # from ..errors import UnreadableFile
    assert "dash" not in tops("app.door")  # for type checkers alone


@pytest.mark.parametrize("name", CORE)
def test_core_knows_nothing_of_browsers_or_of_the_app(name):
    assert not tops(name) & (WEB | {"app", "tests"})


@pytest.mark.parametrize("name", APP)
def test_only_layout_callbacks_and_the_factory_import_dash(name):
    may = name == "app.server" or name.startswith(("app.layout", "app.callbacks"))
    assert may or not tops(name) & {"dash", "dash_ag_grid"}


@pytest.mark.parametrize("name", [name for name in APP if name.startswith("app.figures")])
def test_figures_know_plotly_and_core_and_nothing_of_the_server(name):
    assert not tops(name) & (WEB - {"plotly"})
    assert not own(name) & {"app.server", "app.live", "app.files", "app.jobs", "app.door"}
    assert not {found for found in own(name) if found.startswith(("app.callbacks", "app.layout"))}


@pytest.mark.parametrize("name", APP)
def test_the_application_is_put_together_in_one_place(name):
    """What the factory wires together does not reach back for it; the server starts it when asked."""
    if name not in ("app.server", "app.serving", "app.main", "app.__main__"):
        assert not own(name) & {"app.server", "app.serving", "app.main"}


# What is computed stands below what is kept.
KEPT = {"core.workspace", "core.steps", "core.store"}
COMPUTED = {
    "core.sweep", "core.reading", "core.metrics", "core.checks", "core.diode", "core.handles", "core.dials",
    "core.first_guess", "core.refine", "core.local_ideality", "core.residuals", "core.intervals",
}  # fmt: skip


def below(name, seen=frozenset()):
    """Everything of the project that a module needs, directly or not."""
    for found in own(name) - seen:
        seen = below(found, seen | {found})
    return seen


@pytest.mark.parametrize("name", sorted(COMPUTED))
def test_physics_does_not_know_the_workspace(name):
    assert name in IMPORTS and not below(name) & KEPT


def test_no_modules_import_each_other_in_a_circle():
    graph = {name: own(name) for name in IMPORTS}
    assert len(list(graphlib.TopologicalSorter(graph).static_order())) == len(IMPORTS)


def test_everything_imported_is_declared():
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    declared = {requirement.split(">")[0].replace("-", "_").lower() for requirement in project["dependencies"]}
    declared |= {"flask", "werkzeug"}  # come with Dash, whose server they are
    used = set().union(*(tops(name) for name in IMPORTS)) - set(sys.stdlib_module_names) - {"app", "core", ""}
    assert used <= declared | {"msvcrt", "fcntl"}
