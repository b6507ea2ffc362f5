"""Data flows one way, and imports with it: which part of the program may import which."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

HOST = Path(__file__).resolve().parents[1] / "host"
PACKAGE = "pulsewright"

BASE = {"units", "errors", "files"}
EXECUTORS = {"wire", "chip", "image", "rig", "sequence", "link", "virtual"}
# What each part may import besides itself. A part that stands in no row is a mistake: give it a place in the flow.
MAY_IMPORT = {
    "units": set[str](),
    "errors": {"units"},
    "files": {"units", "errors"},
    "wire": BASE,
    "image": BASE,
    "chip": BASE,
    "rig": BASE | {"chip", "wire"},
    "sequence": {"units", "errors", "chip", "image", "rig", "wire"},  # pure functions: no files either
    "link": BASE | {"chip", "rig", "sequence", "wire"},
    "virtual": BASE | {"wire"},
    "jobs": BASE | EXECUTORS,
    "report": BASE | EXECUTORS | {"jobs"},
    "cli": BASE | EXECUTORS | {"jobs", "report"},
    "__main__": {"cli"},
}
# The one place that opens a rig by its name has to know the virtual one.
OPENS_RIGS = "pulsewright.link.open"
# What compiler and proof may both know: the plain types of a sequence.
SHARED_TYPES = "pulsewright.sequence.types"
PROOF = "pulsewright.sequence.proof"
# Ways to a port or a wire. Only the link talks to a rig; the virtual rig's server stands at the other end of a port.
PORT_MODULES = {"serial", "pty", "tty", "termios", "socket"}
PORT_USERS = ("pulsewright.link", "pulsewright.virtual.serve")


def within(module: str, folder: str) -> bool:
    """Whether `module` is `folder` or lies in it."""
    return module == folder or module.startswith(folder + ".")


def part_of(module: str) -> str:
    """The part a dotted name belongs to: "chip" of "pulsewright.chip.model"; "" for the package itself."""
    return module.split(".")[1] if "." in module else ""


def module_name(path: Path) -> str:
    """The dotted name of a source file under host/."""
    parts = path.relative_to(HOST).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


def imported(source: str, module: str, *, is_package: bool = False) -> list[str]:
    """Every dotted name that `source` imports anywhere, in functions, under TYPE_CHECKING or by a text as well."""
    names: list[str] = []
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Import):
            names += [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            origin = node.module or ""
            if node.level:
                above = module.split(".") if is_package else module.split(".")[:-1]
                kept = above[: len(above) - (node.level - 1)]
                origin = ".".join([*kept, origin] if origin else kept)
            names += [f"{origin}.{alias.name}" for alias in node.names]
        elif isinstance(node, ast.Call):
            called = node.func.attr if isinstance(node.func, ast.Attribute) else getattr(node.func, "id", "")
            first = node.args[0] if node.args else None
            if called in {"import_module", "__import__"}:
                names.append(str(first.value) if isinstance(first, ast.Constant) else f"{PACKAGE}.<computed>")
    return names


def why_not(module: str, name: str) -> str:
    """Why `module` must not import the dotted `name`; "" when it may."""
    part = part_of(module)
    if name.partition(".")[0] in PORT_MODULES:
        return "" if any(within(module, user) for user in PORT_USERS) else "only the link opens ports"
    if not within(name, PACKAGE):
        return ""
    target = part_of(name)
    if target == "<computed>":
        return "" if part == "cli" else "an import by a computed name hides where it goes"
    if target == "sequence" and part == "sequence":
        if within(module, PROOF) and not within(name, PROOF) and not within(name, SHARED_TYPES):
            return "the proof shares nothing with the compiler but its types"
        if not within(module, PROOF) and within(name, PROOF):
            return "the compiler must not know the proof"
        return ""
    if target == part or target not in MAY_IMPORT:  # the rest are names in the package itself, such as its version
        return ""
    if target == "virtual" and within(module, OPENS_RIGS):
        return ""
    return "" if target in MAY_IMPORT[part] else f"{part or PACKAGE} may import only {sorted(MAY_IMPORT[part])}"


def complaints(source: str, module: str, *, is_package: bool = False) -> list[str]:
    """One line for each import of `source`, read as the text of `module`, that goes against the flow."""
    if part_of(module) and part_of(module) not in MAY_IMPORT:
        return [f"{module}: {part_of(module)} has no place in the flow yet"]
    found = [(name, why_not(module, name)) for name in imported(source, module, is_package=is_package)]
    return [f"{module} imports {name}: {why}" for name, why in found if why]


def sources() -> list[Path]:
    """Every Python file of the program."""
    return sorted((HOST / PACKAGE).rglob("*.py"))


def test_every_import_follows_the_flow() -> None:
    """No file of the program imports against the direction in which data flows."""
    assert len(sources()) >= len(MAY_IMPORT)
    wrong = [
        line
        for path in sources()
        for line in complaints(path.read_text("utf-8"), module_name(path), is_package=path.name == "__init__.py")
    ]
    assert wrong == []


def test_every_row_of_the_table_exists() -> None:
    """The table of this test names only parts that the program has, so that a renamed part is noticed."""
    present = {part_of(module_name(path)) for path in sources()}
    assert set(MAY_IMPORT) <= present


@pytest.mark.parametrize(
    ("module", "source"),
    [
        ("pulsewright.sequence.compile", "import pulsewright.link.session"),
        ("pulsewright.sequence.compile", "from pulsewright import virtual"),
        ("pulsewright.sequence.compile", "def late() -> None:\n    from pulsewright.jobs.burn import burn"),
        ("pulsewright.sequence.compile", "from pulsewright.sequence.proof.walk import walk"),
        ("pulsewright.sequence.compile", "from .proof import walk"),
        ("pulsewright.sequence.proof.walk", "from pulsewright.sequence.compile import compile_job"),
        ("pulsewright.sequence.proof.walk", "from ..compile import compile_job"),
        ("pulsewright.sequence.proof.walk", "from pulsewright.sequence import lower"),
        ("pulsewright.sequence.proof.walk", "import pulsewright.sequence.types_of_mine"),
        ("pulsewright.chip.load", "from pulsewright.rig.model import Rig"),
        ("pulsewright.chip.load", "if TYPE_CHECKING:\n    from pulsewright.rig.model import Rig"),
        ("pulsewright.chip.load", "import importlib\nimportlib.import_module('pulsewright.rig')"),
        ("pulsewright.chip.load", "import importlib\nimportlib.import_module('pulsewright.' + name)"),
        ("pulsewright.virtual.judge", "from pulsewright.chip.model import Definition"),
        ("pulsewright.virtual.models.eprom", "from ...sequence import types"),
        ("pulsewright.virtual.serve", "from pulsewright.link import session"),
        ("pulsewright.link.session", "from pulsewright.virtual.bench import Bench"),
        ("pulsewright.report.page", "from pulsewright.cli.main import main"),
        ("pulsewright.jobs.burn", "from pulsewright.report.page import page"),
        ("pulsewright.sequence.compile", "from pulsewright.files import read_whole"),
        ("pulsewright.jobs.burn", "import serial"),
        ("pulsewright.virtual.bench", "import pty"),
        ("pulsewright.wire.frames", "from pulsewright.image.load import load"),
        ("pulsewright.novelty.thing", "import sys"),
    ],
)
def test_an_import_against_the_flow_is_found(module: str, source: str) -> None:
    """Each kind of forbidden import is found, whichever way it is written."""
    assert len(complaints(source, module)) == 1


@pytest.mark.parametrize(
    ("module", "source"),
    [
        ("pulsewright.sequence.compile", "from pulsewright.chip import model\nfrom pulsewright.wire import ops"),
        ("pulsewright.sequence.compile", "from .types import Sequence"),
        ("pulsewright.sequence.proof.walk", "from pulsewright.sequence import types\nfrom . import state"),
        ("pulsewright.sequence.proof.walk", "from pulsewright.sequence.types import Sequence"),
        ("pulsewright.link.open", "from pulsewright.virtual.bench import Bench"),
        ("pulsewright.link.serial_port", "import serial"),
        ("pulsewright.virtual.serve", "import pty, serial"),
        ("pulsewright.cli.main", "from pulsewright import __version__\nfrom pulsewright.jobs import burn"),
        ("pulsewright.wire.generate", "import argparse\nfrom pulsewright.errors import FileMistake"),
    ],
)
def test_an_import_with_the_flow_is_left_alone(module: str, source: str) -> None:
    """What the flow allows raises no complaint."""
    assert complaints(source, module) == []


def test_a_package_file_resolves_its_own_dots() -> None:
    """A dot in an __init__.py means the package itself, not the one around it."""
    assert imported("from . import link", "pulsewright", is_package=True) == ["pulsewright.link"]
    assert imported("from .. import link", "pulsewright.chip.load") == ["pulsewright.link"]


def test_start_up_imports_nothing_heavy() -> None:
    """Importing the command line brings in no library that only some commands need, so that `--help` is quick."""
    probe = (
        "import pulsewright.cli.main, sys; "
        "print(*sorted({'rich', 'serial', 'intelhex', 'hypothesis', 'tomllib', 'platformdirs'} & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", probe], capture_output=True, text=True, check=False)
    assert (done.returncode, done.stdout.strip(), done.stderr) == (0, "", "")
