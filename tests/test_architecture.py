"""The rules of the house that a program can hold.

Each rule is a function of a module and is tried on bad samples too. The rules read the syntax
tree, so an import inside a function or under TYPE_CHECKING counts like any other.
"""

import ast
import re
import subprocess
import sys
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import NamedTuple

import pytest

ROOT = Path(__file__).parents[1]


def _words(row: str) -> tuple[str, ...]:
    return tuple(row.split())


WAY = _words(
    "units physics record reading checks estimates limits lung fit forecast options moved lookback handover"
    " __main__"
)
PHYSICS_MAY_IMPORT = _words("numpy scipy")
PLAIN_PYTHON = _words("__future__ collections dataclasses enum functools itertools math typing")
SCREEN_AND_STORE = _words("dashboard streamlit plotly sqlalchemy")
FILE_BORDERS = _words("reading lookback __main__")
MAY_WRITE = _words("lookback __main__")

# Last word of a name that carries a unit; "per" chains them (l_per_min).
UNITS = _words("mmhg kpa cmh2o ml dl l min s h kg g mol mmol cm m c k j minutes hours seconds")
UNITS_ALONE = _words("minutes hours seconds")
# Whole names of numbers without a unit.
FRACTIONS = (
    *_words("fio2 so2 sao2 svo2 shunt"),
    *_words("dead_space alveolar_dead_space bohr_dead_space enghoff_dead_space"),
)
RATIOS = _words("respiratory_quotient ie_ratio ventilatory_ratio normal_score")
LOGARITHMS = _words("ph co2_pk vq_log_sd")
WORDS = _words("sex obstructive")  # arrays of words, of yes and no
NEEDS_NO_UNIT = (*FRACTIONS, *RATIOS, *LOGARITHMS, *WORDS, *UNITS_ALONE)
NUMBERS = re.compile(r"\b(float|Array|ArrayLike|NDArray)\b")


class Module(NamedTuple):
    """A module by its dotted name, with its text."""

    name: str
    text: str
    is_package: bool = False

    @property
    def tree(self) -> ast.Module:
        return ast.parse(self.text)

    @property
    def stage(self) -> str:
        """The word of the way it belongs to; empty for the package itself."""
        return self.name.partition(".")[2].partition(".")[0]


def modules_of(*packages: str) -> list[Module]:
    found = []
    for path in (p for package in packages for p in sorted((ROOT / package).rglob("*.py"))):
        parts = path.relative_to(ROOT).with_suffix("").parts
        package = parts[-1] == "__init__"
        found.append(Module(".".join(parts[:-1] if package else parts), path.read_text("utf-8"), package))
    return found


def imports_of(module: Module) -> Iterator[str]:
    """Dotted names of all that a module imports, relative ones resolved, each imported name included."""
    for node in ast.walk(module.tree):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            source = node.module or ""
            if node.level:
                here = module.name.split(".")
                up = node.level - 1 if module.is_package else node.level
                source = ".".join(here[: len(here) - up] + ([node.module] if node.module else []))
            yield from (f"{source}.{alias.name}" for alias in node.names)
        elif isinstance(node, ast.Call) and _called(node) in ("import_module", "__import__"):
            yield from (
                a.value for a in node.args if isinstance(a, ast.Constant) and isinstance(a.value, str)
            )


def _called(call: ast.Call) -> str:
    function = call.func
    return function.attr if isinstance(function, ast.Attribute) else getattr(function, "id", "")


def _calls(module: Module) -> Iterator[ast.Call]:
    return (node for node in ast.walk(module.tree) if isinstance(node, ast.Call))


# The rules: each gives one line for every breach.


def against_the_way(module: Module) -> Iterator[str]:
    """Engine modules import earlier stages of the way and their own, and every stage stands on the way."""
    if module.name == "engine":  # gathers the public names of all stages
        return
    if module.stage not in WAY:
        yield f"{module.name} is no stage of the way"
        return
    for name in imports_of(module):
        root, _, rest = name.partition(".")
        stage = rest.partition(".")[0]
        if name == "engine.__version__":  # a word, no stage; engine/__init__.py gives it before all else
            continue
        if root == "engine" and (stage not in WAY or WAY.index(stage) > WAY.index(module.stage)):
            yield f"{module.name} imports {name}"


def beyond_numbers(module: Module) -> Iterator[str]:
    """Physics imports numpy, scipy, itself, and plain Python without files, clocks or chance."""
    for name in imports_of(module):
        allowed = (*PHYSICS_MAY_IMPORT, *PLAIN_PYTHON)
        if name.partition(".")[0] not in allowed and not name.startswith("engine.physics."):
            yield f"{module.name} imports {name}"


def towards_the_screen(module: Module) -> Iterator[str]:
    """Engine knows no screen and no store; pandas only at its file borders."""
    banned = SCREEN_AND_STORE if module.stage in FILE_BORDERS else (*SCREEN_AND_STORE, "pandas")
    for name in imports_of(module):
        if name.partition(".")[0] in banned:
            yield f"{module.name} imports {name}"


def reads_files(module: Module) -> Iterator[str]:
    """Only reading opens files to read; only look-back and the terminal write any."""
    if module.stage == "reading":
        return
    readers = _words("open read_text read_bytes load loadtxt genfromtxt fromfile read_csv read_json")
    writers = _words("write_text write_bytes to_csv to_json savetxt save dump")
    for call in _calls(module):
        name = _called(call)
        writes = name in writers or (name == "open" and _opens_to_write(call))
        if (writes and module.stage not in MAY_WRITE) or (name in readers and not writes):
            yield f"{module.name}:{call.lineno} calls {name}"


def _opens_to_write(call: ast.Call) -> bool:
    values = [*call.args, *(k.value for k in call.keywords if k.arg == "mode")]
    return any(isinstance(v, ast.Constant) and v.value in ("w", "x", "a", "wb", "xb", "ab") for v in values)


def reads_the_clock(module: Module) -> Iterator[str]:
    """Only the terminal reads the clock: no time module elsewhere, nothing called now or today."""
    if module.stage == "__main__":
        return
    for name in imports_of(module):
        if name.partition(".")[0] == "time":
            yield f"{module.name} imports {name}"
    for call in _calls(module):
        words = [a.value for a in call.args if isinstance(a, ast.Constant)]
        asks = _called(call) in ("datetime64", "Timestamp") and ("now" in words or "today" in words)
        if _called(call) in ("now", "utcnow", "today") or asks:
            yield f"{module.name}:{call.lineno} reads the clock"


def draws_without_a_seed(module: Module) -> Iterator[str]:
    """Chance enters by a seeded generator only."""
    for name in imports_of(module):
        if name.partition(".")[0] in ("random", "secrets", "uuid"):
            yield f"{module.name} imports {name}"
    modern = {"default_rng", "Generator", "SeedSequence", "PCG64", "Philox", "SFC64"}
    for call in _calls(module):
        function = ast.unparse(call.func)
        if _called(call) in modern - {"Generator"} and not (call.args or call.keywords):
            yield f"{module.name}:{call.lineno} draws without a seed"
        if re.search(r"\b(np|numpy)\.random\.\w+$", function) and _called(call) not in modern:
            yield f"{module.name}:{call.lineno} draws from the shared generator"


def without_unit(module: Module) -> Iterator[str]:
    """Names of numbers in physics: parameters, fields and functions of the public part."""
    for node in _public(module.tree):
        if isinstance(node, ast.ClassDef):
            named = [(n.target, n.annotation) for n in node.body if isinstance(n, ast.AnnAssign)]
            pairs = [(ast.unparse(target), annotation) for target, annotation in named]
        else:
            arguments = [*node.args.posonlyargs, *node.args.args, *node.args.kwonlyargs]
            pairs = [(a.arg, a.annotation) for a in arguments] + [(node.name, node.returns)]
        for name, annotation in pairs:
            if name not in ("self", "cls") and _is_number(annotation) and not carries_unit(name):
                yield f"{module.name}: {name} says no unit"


def _is_number(annotation: ast.expr | None) -> bool:
    if annotation is None:  # unsaid counts as a number, so that leaving it out hides nothing
        return True
    text = ast.unparse(annotation)
    return bool(NUMBERS.search(text)) and "bool" not in text and not text.startswith(("tuple", "dict"))


def carries_unit(name: str) -> bool:
    """Unit last, or last before a condition: x_mmhg, x_from_y_mmhg, x_mmhg_at_37; its spread: x_mmhg_sd."""
    quantity = re.split(r"_(?:from|at|after|of|in|to)_", name)[0]
    says_fraction = "fraction" in quantity.split("_")
    return says_fraction or quantity in NEEDS_NO_UNIT or _ends_in_unit(quantity) or _ends_in_unit(name)


def _ends_in_unit(name: str) -> bool:
    before, _, last = name.removesuffix("_sd").rpartition("_")
    return bool(before) and last in UNITS


def _public(tree: ast.AST) -> Iterator[ast.FunctionDef | ast.ClassDef]:
    """Public functions and classes, and the public methods of those classes."""
    for node in getattr(tree, "body", []):
        if isinstance(node, ast.FunctionDef | ast.ClassDef) and not node.name.startswith("_"):
            yield node
            if isinstance(node, ast.ClassDef):
                yield from _public(node)


def undocumented(module: Module) -> Iterator[str]:
    """Every public function, class and method in engine says what it is."""
    for node in _public(module.tree):
        if not ast.get_docstring(node) and not _is_property(node):
            yield f"{module.name}:{node.lineno} {node.name} has no docstring"


def _is_property(node: ast.FunctionDef | ast.ClassDef) -> bool:
    """A property reads like a field, and fields have no docstring of their own."""
    return any(ast.unparse(d) in ("property", "cached_property") for d in node.decorator_list)


def draws_with_the_screen(module: Module) -> Iterator[str]:
    """Charts are plain dicts: they know no Streamlit."""
    for name in imports_of(module):
        if name.partition(".")[0] == "streamlit":
            yield f"{module.name} imports {name}"


# Which modules each rule governs, and a bad and a good sample of each.


class Rule(NamedTuple):
    breaches: Callable[[Module], Iterator[str]]
    governs: str
    bad: tuple[Module, ...]
    good: tuple[Module, ...]


RULES = (
    Rule(
        against_the_way,
        "engine",
        bad=(
            Module("engine.checks", "from engine.fit import fit"),
            Module("engine.checks", "from . import fit"),
            Module("engine.reading.case_file", "from ..checks import checks_for"),
            Module("engine.reading", "from ..checks import checks_for", is_package=True),
            Module("engine.limits", "def f():\n    import engine.lung"),
            Module("engine.limits", "import importlib\nimportlib.import_module('engine.lung')"),
            Module("engine.limits", "from engine import Case"),
            Module("engine.utils", "import math"),
        ),
        good=(
            Module(
                "engine.fit",
                "from engine import lung, __version__\nfrom engine.physics import air\nimport numpy",
            ),
            Module("engine.reading.case_file", "from ..record import Case\nfrom . import words"),
            Module("engine", "from .handover import sheet", is_package=True),
        ),
    ),
    Rule(
        beyond_numbers,
        "engine.physics",
        bad=(
            Module("engine.physics.air", "from engine.units import kpa_from_mmhg"),
            Module("engine.physics.air", "from ..record import Case"),
            Module("engine.physics.air", "import pandas"),
            Module("engine.physics.air", "from pathlib import Path"),
        ),
        good=(
            Module("engine.physics.air", "import math\nfrom scipy import optimize\nfrom .oxygen import so2"),
        ),
    ),
    Rule(
        towards_the_screen,
        "engine",
        bad=(
            Module("engine.handover", "import streamlit as st"),
            Module("engine.handover", "from plotly.graph_objects import Figure"),
            Module("engine.lookback", "import sqlalchemy.orm"),
            Module("engine.__main__", "from dashboard import wording"),
            Module("engine.fit", "import pandas as pd"),
        ),
        good=(Module("engine.lookback", "import pandas as pd"),),
    ),
    Rule(
        reads_files,
        "engine",
        bad=(
            Module("engine.checks", "open('a')"),
            Module("engine.lung", "Path('a').read_text()"),
            Module("engine.lookback", "Path('a').open()"),
            Module("engine.__main__", "json.load(file)"),
            Module("engine.forecast", "Path('a').write_text('b')"),
            Module("engine.forecast", "open('a', 'w')"),
        ),
        good=(
            Module("engine.reading.case_file", "Path('a').read_text()"),
            Module("engine.lookback", "open('a', 'w')\nPath('b').open(mode='w')\ntable.to_csv('c')"),
            Module("engine.fit", "json.loads('{}')"),
        ),
    ),
    Rule(
        reads_the_clock,
        "engine",
        bad=(
            Module("engine.forecast", "from datetime import datetime\ndatetime.now()"),
            Module("engine.forecast", "import datetime\ndatetime.datetime.utcnow()"),
            Module("engine.forecast", "from time import perf_counter"),
            Module("engine.forecast", "np.datetime64('now')"),
        ),
        good=(
            Module("engine.__main__", "import time\ntime.time()"),
            Module("engine.forecast", "from datetime import datetime, time\nnow = datetime(2031, 3, 4)"),
        ),
    ),
    Rule(
        draws_without_a_seed,
        "engine",
        bad=(
            Module("engine.fit", "np.random.default_rng()"),
            Module("engine.fit", "np.random.normal(size=3)"),
            Module("engine.fit", "import random"),
        ),
        good=(Module("engine.fit", "rng = np.random.default_rng(seed)\nrng.normal(size=3)"),),
    ),
    Rule(
        without_unit,
        "engine.physics",
        bad=(
            Module("engine.physics.air", "def pio2_mmhg(fio2: float, pressure: float) -> float: ..."),
            Module("engine.physics.air", "def pio2(fio2: float) -> Array: ..."),
            Module("engine.physics.oxygen", "def po2_from_so2(so2: ArrayLike) -> Array: ..."),
            Module("engine.physics.oxygen", "def so2(po2_mmhg, *, temperature=37.0) -> Array: ..."),
            Module("engine.physics.stores", "class Stores:\n    volume: Array"),
        ),
        good=(
            Module("engine.physics.oxygen", "def so2_from_po2(po2_mmhg: ArrayLike, hot: bool) -> Array: ..."),
            Module(
                "engine.physics.oxygen", "def po2_from_so2_mmhg(so2: ArrayLike, units: int = 9) -> Array: ..."
            ),
            Module("engine.physics.air", "def _short(p: float) -> float: ..."),
            Module("engine.physics.stores", "class Stores:\n    volume_ml: Array\n    paco2_mmhg_sd: float"),
        ),
    ),
    Rule(
        undocumented,
        "engine",
        bad=(
            Module("engine.fit", "def fit():\n    return 1"),
            Module("engine.fit", "class Fit:\n    '''A fit.'''\n    def best(self):\n        return 1"),
        ),
        good=(
            Module("engine.fit", "def fit():\n    '''Fit.'''\ndef _step():\n    return 1"),
            Module(
                "engine.fit",
                "class Fit:\n    '''Fit.'''\n    @property\n    def label(self):\n        return 1",
            ),
        ),
    ),
    Rule(
        draws_with_the_screen,
        "dashboard.charts",
        bad=(Module("dashboard.charts.plane", "import streamlit"),),
        good=(Module("dashboard.charts.plane", "import numpy\nfrom dashboard import wording"),),
    ),
)


def _name(rule: Rule) -> str:
    return rule.breaches.__name__


@pytest.mark.parametrize("rule", RULES, ids=_name)
def test_the_house_keeps_the_rule(rule: Rule):
    governed = [m for m in modules_of("engine", "dashboard") if f"{m.name}.".startswith(f"{rule.governs}.")]
    assert governed, f"nothing stands under {rule.governs}"
    assert [line for module in governed for line in rule.breaches(module)] == []


@pytest.mark.parametrize("rule", RULES, ids=_name)
def test_the_rule_can_fail_and_can_pass(rule: Rule):
    for module in rule.bad:
        assert list(rule.breaches(module)), f"missed: {module.text}"
    for module in rule.good:
        assert list(rule.breaches(module)) == []


def test_a_bare_process_starts_the_dashboard(tmp_path: Path):
    """Outside the repository's folder, so that only the installed packages can help."""
    app = ROOT / "dashboard" / "app.py"
    ran = subprocess.run(
        [sys.executable, str(app)], cwd=tmp_path, capture_output=True, text=True, timeout=120
    )
    assert ran.returncode == 0, ran.stderr
    assert "Traceback" not in ran.stderr


MACHINE_PATH = re.compile(r"(?:^|[^\w.])/(?:work|farm|tmp|home|root|Users|opt)/[A-Za-z.]", re.MULTILINE)


def test_nothing_tracked_mentions_a_machine():
    listed = subprocess.run(["git", "ls-files", "-z"], cwd=ROOT, capture_output=True, text=True)
    if listed.returncode:
        pytest.skip("not a git checkout, so nothing says which files belong to the project")
    paths = [ROOT / name for name in listed.stdout.split("\0") if name]
    assert paths
    texts = {path: path.read_bytes().decode("utf-8", errors="ignore") for path in paths if path.is_file()}
    assert [str(path.relative_to(ROOT)) for path, text in texts.items() if MACHINE_PATH.search(text)] == []


def test_the_search_for_machine_paths_finds_one_and_spares_a_web_address():
    folder = "/" + "tmp" + "/x"  # in pieces, so that this file is not a find itself
    assert MACHINE_PATH.search(f"look in {folder}") and MACHINE_PATH.search(folder)
    assert not MACHINE_PATH.search("example.org" + folder) and not MACHINE_PATH.search("per min/min")
