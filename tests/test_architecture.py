"""The arrows of the house, read from the source itself."""

from __future__ import annotations

import ast
import subprocess
import sys
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from io import StringIO
from pathlib import Path

import pytest
from django.core.management import call_command

TOP = Path(__file__).resolve().parents[1]
APPS = ("register", "calibration")
ARITHMETIC = ("register.engineering", "calibration.metrology")
TOP_LEVEL = {
    "README.md",
    "DEVELOPERS.md",
    "manage.py",
    "pyproject.toml",
    "register",
    "calibration",
    "templates",
    "static",
    "fixtures",
    "tests",
}
#: Rooms of an app that are not acts whatever they import.
ROOMS = ("views", "forms", "models", "templatetags", "migrations", "management", "engineering", "metrology")
#: Modules that speak SQL themselves, and why no queryset will do.
SPEAK_SQL = {
    "register.guards": "triggers",
    "register.checks": "asks SQLite for a pragma",
    "register.backing_up": "copies tables as they are",
    "register.restoring": "fills tables as they were",
    "register.bulk": "many plain rows at once for an act",
    "register.membership": "an empty table has no row that a second beginning could wait for",
    "calibration.queries.listing": "compiling the statements of lists took several times longer than answering them",
}
#: Modules that write without leaving audit entries, and why nothing is missing in the trail.
LEAVE_NO_ENTRY = {
    "register.auditing": "writes the entries",
    "register.storing": "one row for an act, which notes it",
    "register.bulk": "many rows for an act, which notes them",
    "calibration.queries.standings": "worked out again from what acts note",
    "calibration.recomputing": "worked out again from frozen readings",
    "calibration.storing_entries": "entries of a sheet are frozen and name their person: they are a trail themselves",
}
WRITES = {"save", "delete", "create", "get_or_create", "update_or_create", "bulk_create", "bulk_update"}
SQL = {"execute", "executemany", "raw", "extra", "copy"}


@dataclass(frozen=True)
class Module:
    """A file of the site; `imports` are full names of all it imports, also inside functions, but for types alone."""

    name: str
    path: Path
    tree: ast.Module
    imports: frozenset[str]

    @property
    def room(self) -> str:
        """The second part of the name where it is a room, else nothing: the module stands in the app itself."""
        parts = self.name.split(".")
        return parts[1] if len(parts) > 1 and parts[1] in ROOMS else ""

    @property
    def names_act(self) -> bool:
        """Whether the module leaves audit entries."""
        return "register.auditing.Act" in self.imports


def _imports(tree: ast.AST) -> Iterator[str]:
    for node in ast.iter_child_nodes(tree):
        if isinstance(node, ast.If) and "TYPE_CHECKING" in ast.unparse(node.test):
            continue
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0 and node.module, "imports name their module in full"
            yield node.module
            yield from (f"{node.module}.{alias.name}" for alias in node.names)
        else:
            yield from _imports(node)


@cache
def modules() -> dict[str, Module]:
    found = {}
    for app in APPS:
        for path in sorted((TOP / app).rglob("*.py")):
            parts = path.relative_to(TOP).with_suffix("").parts
            name = ".".join(parts[:-1] if parts[-1] == "__init__" else parts)
            tree = ast.parse(path.read_text())
            found[name] = Module(name, path, tree, frozenset(_imports(tree)))
    return found


def in_room(*rooms: str) -> list[Module]:
    return [module for module in modules().values() if module.room in rooms]


def imported(module: Module) -> set[str]:
    """Modules of the site that a module imports."""
    return {name for name in module.imports if name in modules()}


@cache
def acts() -> frozenset[str]:
    """Modules that stand in an app itself and leave audit entries, and the named ones that need not.

    Besides them what only they use: inner pieces of an act, which write within its transaction.
    """
    found = {module.name for module in modules().values() if not module.room and module.names_act} | set(LEAVE_NO_ENTRY)
    used_by: dict[str, set[str]] = {}
    for module in modules().values():
        for name in imported(module):
            used_by.setdefault(name, set()).add(module.name)
    while True:
        inner = {
            module.name
            for module in modules().values()
            if not module.room and module.name not in found and used_by.get(module.name, {""}) <= found
        }
        if not inner:
            return frozenset(found)
        found |= inner


def offenders(modules_: list[Module], barred: tuple[str, ...]) -> list[str]:
    return sorted(
        f"{module.name} imports {name}"
        for module in modules_
        for name in module.imports
        if name.startswith(tuple(f"{prefix}." for prefix in barred)) or name in barred
    )


def test_the_top_level_holds_what_the_plan_lists() -> None:
    listed = subprocess.run(["git", "ls-files"], cwd=TOP, capture_output=True, text=True, check=True).stdout.split("\n")
    tops = {name.split("/")[0] for name in listed if name}
    assert {name for name in tops if not name.startswith(".")} - TOP_LEVEL == set()


def test_no_room_is_named_for_anything_at_all() -> None:
    vague = {"services", "utils", "util", "helpers", "common", "misc", "signals", "managers"}
    assert [name for name in modules() if vague & set(name.split("."))] == []


def test_reads_records_and_drawing_stand_below_pages() -> None:
    below = ("calibration.queries.", "calibration.records.", "calibration.drawing.")
    barred = ("calibration.contexts", "calibration.views", "calibration.forms", "register.views", "register.forms")
    reads = [module for module in modules().values() if module.name.startswith(below)]
    contexts = [module for module in modules().values() if module.name.startswith("calibration.contexts.")]
    assert len(reads) > 10 and len(contexts) > 5
    assert offenders(reads, barred) == []
    assert offenders(contexts, ("calibration.views", "register.views", "calibration.forms")) == []


def test_the_register_never_imports_calibration() -> None:
    assert (
        offenders([module for module in modules().values() if module.name.startswith("register")], ("calibration",))
        == []
    )


@pytest.mark.parametrize("package", ARITHMETIC)
def test_arithmetic_imports_numbers_and_the_standard_library_only(package: str) -> None:
    allowed = {"numpy", "scipy", "pint", "__future__", *sys.stdlib_module_names}
    wrong = {
        f"{module.name} imports {name}"
        for module in modules().values()
        if module.name.startswith(package)
        for name in module.imports
        if name.split(".")[0] not in allowed and not name.startswith(ARITHMETIC if "metrology" in package else package)
    }
    assert wrong == set()


def test_arithmetic_loads_where_there_is_no_django() -> None:
    names = [name for name in modules() if name.startswith(ARITHMETIC)]
    assert len(names) > 20
    code = f"import sys; sys.modules['django'] = None\nfor name in {names}: __import__(name)"
    subprocess.run([sys.executable, "-c", code], cwd=TOP, check=True)


@pytest.mark.parametrize(
    ("room", "barred"),
    [
        ("models", ("views", "forms", "queries", "templatetags", "management")),
        ("forms", ("views", "templatetags", "management")),
        ("templatetags", ("views", "forms", "management")),
        ("engineering", ("views", "forms", "models", "queries", "templatetags")),
        ("metrology", ("views", "forms", "models", "queries", "templatetags")),
    ],
)
def test_arrows_between_rooms_point_one_way(room: str, barred: tuple[str, ...]) -> None:
    assert offenders(in_room(room), tuple(f"{app}.{name}" for app in APPS for name in barred)) == []


def test_acts_and_reads_know_no_page() -> None:
    """What stands in an app itself is used by views; only what makes urls knows views."""
    own = [module for module in modules().values() if not module.room and "django.urls.path" not in module.imports]
    assert offenders(own, tuple(f"{app}.{room}" for app in APPS for room in ("views", "forms", "templatetags"))) == []


def test_views_store_nothing_by_the_back_door() -> None:
    """What writes without leaving an entry is there for acts: no page uses it."""
    inner = {"register.storing.store", "register.bulk"}
    assert offenders(in_room("views", "forms", "templatetags"), tuple(inner)) == []


def test_models_and_forms_call_no_act() -> None:
    wrong = [
        f"{module.name} imports {name}"
        for module in in_room("models", "forms", "templatetags")
        for name in imported(module)
        if name in acts() and modules()[name].names_act
    ]
    assert wrong == []


@dataclass(frozen=True)
class Write:
    module: str
    line: int
    code: str

    def __str__(self) -> str:
        return f"{self.module}:{self.line} {self.code}"


def writes(module: Module) -> Iterator[Write]:
    for node in ast.walk(module.tree):
        if not isinstance(node, ast.Call) or not isinstance(node.func, ast.Attribute):
            continue
        receiver = ast.unparse(node.func.value)
        if receiver in {"super()", "default_storage"}:  # a model's own way on; a file, not a row
            continue
        name = node.func.attr
        rows = any(part in receiver for part in (".objects", ".filter(", ".exclude(", ".all()", "_base_manager"))
        if name in WRITES or (name == "update" and rows):
            yield Write(module.name, node.lineno, ast.unparse(node)[:80])


def test_only_acts_write() -> None:
    """Saving, deleting, updating in bulk or one by one: nowhere but in acts and in their inner pieces."""
    allowed = acts()
    wrong = [str(write) for module in modules().values() if module.name not in allowed for write in writes(module)]
    assert wrong == []


def test_sql_is_spoken_in_named_places_only() -> None:
    wrong = []
    for module in modules().values():
        if module.name in SPEAK_SQL or module.room == "migrations":
            continue
        for node in ast.walk(module.tree):
            if isinstance(node, ast.Call) and isinstance(node.func, ast.Attribute) and node.func.attr in SQL:
                receiver = ast.unparse(node.func.value)
                if "cursor" in receiver or node.func.attr in {"raw", "extra"}:
                    wrong.append(str(Write(module.name, node.lineno, ast.unparse(node)[:80])))
    assert wrong == []


def test_acts_take_their_arguments_by_name_and_stand_in_one_transaction() -> None:
    """An act is a public function of an act module that says who acts: `by: Actor`, wherever it stands."""
    wrong, seen = [], 0
    for name in acts():
        for node in modules()[name].tree.body:
            if not isinstance(node, ast.FunctionDef) or node.name.startswith("_"):
                continue
            arguments = node.args
            if "by: Actor" not in ast.unparse(arguments):
                continue
            seen += 1
            if arguments.posonlyargs or arguments.args:
                wrong.append(f"{name}.{node.name}: by position")
            atomic = any("atomic" in ast.unparse(decorator) for decorator in node.decorator_list)
            if not atomic and "transaction.atomic()" not in ast.unparse(node) and not _hands_on(node, name):
                wrong.append(f"{name}.{node.name}: in no transaction")
    assert wrong == []
    assert seen > 40


def _hands_on(function: ast.FunctionDef, module: str) -> bool:
    """Whether a function only calls one of the same module that is atomic, or that makes a transaction of each row."""
    atomic = {
        node.name
        for node in modules()[module].tree.body
        if isinstance(node, ast.FunctionDef)
        and (
            "transaction.atomic()" in ast.unparse(node) or any("atomic" in ast.unparse(x) for x in node.decorator_list)
        )
    }
    called = {
        node.func.id for node in ast.walk(function) if isinstance(node, ast.Call) and isinstance(node.func, ast.Name)
    }
    return bool(atomic & called)


def test_signals_make_no_rows_but_entries_about_the_door() -> None:
    """Receivers are connected in two places: guards after a migrate, and entries about signing in and out."""
    connecting = {
        module.name
        for module in modules().values()
        if module.room != "migrations"
        for node in ast.walk(module.tree)
        if isinstance(node, ast.Call)
        and (ast.unparse(node.func).endswith("receiver") or "dispatch_uid" in ast.unparse(node))
    }
    assert connecting == {"register.apps", "register.entering"}


def test_every_folder_of_tests_is_a_package() -> None:
    folders = {path.parent for path in (TOP / "tests").rglob("test_*.py")}
    assert [str(folder) for folder in folders if not (folder / "__init__.py").exists()] == []


@pytest.mark.django_db
def test_migrations_say_what_the_models_say() -> None:
    out = StringIO()
    call_command("makemigrations", check=True, dry_run=True, stdout=out, verbosity=0)


def test_nothing_is_left_unfinished() -> None:
    marks = ("TO" + "DO", "FIX" + "ME", "X" + "XX", "raise NotImplemented" + "Error")
    wrong = [
        f"{path.relative_to(TOP)}: {mark}"
        for folder in ("register", "calibration", "templates", "static", "fixtures", "tests")
        for suffix in ("py", "html", "js", "css")
        for path in (TOP / folder).rglob(f"*.{suffix}")
        for mark in marks
        if mark in path.read_text()
    ]
    assert wrong == []
