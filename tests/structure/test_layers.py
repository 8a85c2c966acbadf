"""The order of the rooms: imports point one way, and nothing happens when a module is imported.

The ranks are read from the table in DEVELOPERS.md, so the page people read is the rule the test keeps.
"""

import ast
import math
import os
import re
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
PACKAGE = ROOT / "inverse"
BANNED_STEMS = {"utils", "util", "helpers", "helper", "common", "misc", "tools", "core", "base"}
OUTER = ("__init__", "__main__")  # of the package itself: they belong to no room
FILES = sorted(PACKAGE.rglob("*.py"))


def ranks():
    """Room -> rank, from the table `| rank | rooms |` of DEVELOPERS.md."""
    rows = re.findall(r"^\| (\d+) \| (.+) \|$", (ROOT / "DEVELOPERS.md").read_text("utf-8"), re.MULTILINE)
    return {room: int(rank) for rank, rooms in rows for room in re.findall(r"`(\w+)`", rooms)}


def writers():
    """The rooms that DEVELOPERS.md allows to write files."""
    page = (ROOT / "DEVELOPERS.md").read_text("utf-8")
    said = re.search(r"only ((?:`\w+`(?:, | and )?)+) write files", page)
    return set(re.findall(r"`(\w+)`", said[1]))


RANK, WRITERS = ranks(), writers()


def room_of(file):
    """The room a file of the package belongs to: its folder, or its own name at the top."""
    return file.relative_to(PACKAGE).with_suffix("").parts[0]


def imported(tree):
    """Full dotted names imported anywhere in a syntax tree; a relative import gives its dots."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            source = "." * node.level + (node.module or "")
            yield from (f"{source}.{alias.name}" for alias in node.names)


def rooms_imported(tree):
    """Rooms of this package that a syntax tree imports."""
    names = {name.split(".")[1] for name in imported(tree) if name.startswith("inverse.")}
    return names - {"__version__"}  # the package's own, no room


def called(tree):
    """Dotted names of everything called, as far as they are plain names: `print`, `path.write_text`."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Call):
            name = ast.unparse(node.func)
            yield name, node


WRITING_METHODS = {"write_text", "write_bytes", "savefig", "mkdir", "makedirs"}
WRITING_NAMES = {"os.replace", "os.rename", "shutil.move", "shutil.copy", "np.save", "np.savetxt", "np.savez"}


def writes(tree):
    """Calls that put something on the disk."""
    for name, node in called(tree):
        if name.split(".")[-1] in WRITING_METHODS or name in WRITING_NAMES:
            yield name
        elif name.split(".")[-1] == "open":
            arguments = [*node.args[name == "open" :], *(k.value for k in node.keywords if k.arg == "mode")]
            modes = [a.value for a in arguments if isinstance(a, ast.Constant) and isinstance(a.value, str)]
            if any(set(mode) & set("wax+") for mode in modes[:1]):
                yield name


def tree_of(file):
    return ast.parse(file.read_text("utf-8"))


def upward(room, tree):
    """Rooms of equal or higher rank, other than itself, that a file of ``room`` imports."""
    others = rooms_imported(tree) - {room}
    return {other for other in others if RANK[room] <= RANK.get(other, math.inf)}


@pytest.fixture(params=[f for f in FILES if f.parent != PACKAGE or f.stem not in OUTER],
                ids=lambda f: str(f.relative_to(PACKAGE)))
def file(request):
    return request.param


def test_the_rank_table_was_found():
    """DEVELOPERS.md holds ranks from `units` (0) to `cli` (highest), or every test below would be empty."""
    assert RANK["units"] == 0 and RANK["cli"] == max(RANK.values()) and len(RANK) >= 18
    assert "export" in WRITERS and not WRITERS & {"trace", "refine", "verify", "limit", "brief"}


def test_every_room_has_a_rank():
    """A new room must find its place in DEVELOPERS.md first."""
    rooms = {room_of(f) for f in FILES} - set(OUTER)
    assert rooms - set(RANK) == set()


def test_imports_point_one_way(file):
    """A room imports only rooms of lower rank."""
    assert upward(room_of(file), tree_of(file)) == set()


def test_imports_are_written_in_full(file):
    """No relative import: the line says which room is meant."""
    assert [name for name in imported(tree_of(file)) if name.startswith(".")] == []


def test_no_file_has_a_name_that_says_nothing(file):
    """utils, helpers and their like are drawers, not nouns."""
    assert not {*file.relative_to(PACKAGE).with_suffix("").parts} & BANNED_STEMS


@pytest.mark.parametrize("path", [f for f in FILES if room_of(f) == "verify"], ids=lambda f: f.stem)
def test_the_second_road_shares_nothing_with_the_first(path):
    """verify imports neither JAX nor any room that traces or refines with it."""
    names = set(imported(tree_of(path)))
    assert {name.split(".")[0] for name in names} & {"jax", "optax", "jaxlib"} == set()
    assert rooms_imported(tree_of(path)) & {"seed", "trace", "refine"} == set()


def test_only_the_command_line_prints(file):
    """Everybody else returns values, or tells the watcher."""
    names = {name for name, _ in called(tree_of(file))}
    if room_of(file) != "cli":
        assert names & {"print", "sys.stdout.write", "sys.stderr.write"} == set()


def test_only_the_rooms_of_files_write_files(file):
    """The physics never touches the disk."""
    if room_of(file) not in WRITERS:
        assert list(writes(tree_of(file))) == []


def test_only_the_report_draws(file):
    """matplotlib is slow to import and belongs behind the report."""
    if room_of(file) != "report":
        assert {n for n in imported(tree_of(file)) if n.startswith("matplotlib")} == set()


def test_precision_is_set_at_the_door_only(file):
    """jax.config is changed by the command line (and by tests/conftest.py), never by a room."""
    if room_of(file) != "cli":
        assert [name for name, _ in called(tree_of(file)) if name.endswith("config.update")] == []


def test_no_wrong_number_is_swept_away(file):
    """nan_to_num hides the place where a NaN was born."""
    assert "nan_to_num" not in {name.split(".")[-1] for name, _ in called(tree_of(file))}


IMPORT_ALL = """
import importlib, io, os, pathlib, sys
before = dict(os.environ)
missing = []
for name in sys.argv[1:]:
    try:
        importlib.import_module(name)
    except ModuleNotFoundError as fault:
        if fault.name.split(".")[0] not in ("OCP",):  # the optional CAD extra
            raise
import jax
assert not jax.config.jax_enable_x64, "a module set the precision of JAX"
assert dict(os.environ) == before, "a module changed the environment"
assert not list(pathlib.Path(".").iterdir()), "a module wrote a file"
"""


def modules():
    for path in FILES:
        if path.stem != "__main__":
            yield ".".join(path.relative_to(ROOT).with_suffix("").parts).removesuffix(".__init__")


def run(code, *arguments, folder):
    command = [sys.executable, "-W", "error", "-c", code, *arguments]
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    return subprocess.run(command, cwd=folder, capture_output=True, text=True, env=environment)


def test_nothing_happens_on_import(tmp_path):
    """All modules in a fresh interpreter: no output, no file, no setting changed, JAX left in 32 bit."""
    done = run(IMPORT_ALL, *modules(), folder=tmp_path)
    assert (done.returncode, done.stdout, done.stderr) == (0, "", "")


def test_the_command_line_opens_without_the_heavy_libraries(tmp_path):
    """`inverse --help` must not wait for JAX, SciPy, matplotlib, pydantic or CAD."""
    heavy = "{'jax', 'scipy', 'numpy', 'matplotlib', 'pydantic', 'OCP', 'ezdxf', 'jinja2', 'optax'}"
    done = run(f"import inverse.cli, sys; print(*sorted({heavy} & set(sys.modules)))", folder=tmp_path)
    assert (done.returncode, done.stdout.strip(), done.stderr) == (0, "", "")


@pytest.mark.parametrize("room, source, found", [
    ("verify", "from inverse.trace import route", {"trace"}),
    ("verify", "def f():\n    import inverse.refine.plan", {"refine"}),
    ("profile", "from inverse import brief", {"brief"}),
    ("limit", "from inverse.profile.section import Section", {"profile"}),
    ("limit", "from inverse.emitter import Emitter\nfrom inverse.limit import etendue", set()),
])
def test_the_import_rule_sees_what_it_should(room, source, found):
    """Control: wrong imports in a made-up file are found, right ones are not."""
    assert upward(room, ast.parse(source)) == found


@pytest.mark.parametrize("source, count", [
    ("open('a', 'w')", 1), ("path.open(mode='wb')", 1), ("path.write_text('a')", 1), ("os.replace(a, b)", 1),
    ("open('a')", 0), ("path.open('rb')", 0), ("text.replace('w', 'x')", 0),
])
def test_the_writing_rule_sees_what_it_should(source, count):
    """Control: writing calls are told from reading ones."""
    assert len(list(writes(ast.parse(source)))) == count
