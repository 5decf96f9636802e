"""The rules of the dashboard's own rooms, and what its server lets out."""

import ast
import logging
import re
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest
from streamlit import error_util

from dashboard import server

ROOT = Path(__file__).parents[2]
DASHBOARD = ROOT / "dashboard"
SCREEN_LIBRARY = "streamlit"


def sources(*where):
    found = [path for place in where for path in sorted((DASHBOARD / place).rglob("*.py"))]
    assert found
    return found


def imports_of(path):
    for node in ast.walk(ast.parse(path.read_text("utf-8"))):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            yield node.module or ""


def names_used(path):
    tree = ast.parse(path.read_text("utf-8"))
    return {node.attr for node in ast.walk(tree) if isinstance(node, ast.Attribute)}


@pytest.mark.parametrize("room", ["charts", "tables", "wording"])
def test_what_makes_figures_and_words_does_not_know_the_screen_library(room):
    for path in sources(room):
        assert not [name for name in imports_of(path) if name.split(".")[0] == SCREEN_LIBRARY], path


def test_only_the_session_touches_session_state():
    assert [path.name for path in sources("") if "session_state" in names_used(path)] == ["session.py"]


def test_only_cached_caches_what_concerns_a_patient():
    caching = {path.name for path in sources("") if {"cache_data", "cache_resource"} & names_used(path)}
    assert caching == {"cached.py", "__init__.py"}  # live/__init__.py registers its component once
    text = (DASHBOARD / "cached.py").read_text("utf-8")
    decorators = re.findall(r"@st\.cache_\w+\((.*)\)", text)
    assert decorators and all('scope="session"' in d and "max_entries=" in d for d in decorators)


def test_views_do_no_arithmetic():
    sums = (ast.Add, ast.Sub, ast.Mult, ast.Div, ast.Pow, ast.FloorDiv, ast.Mod)
    for path in sources("views"):
        for node in ast.walk(ast.parse(path.read_text("utf-8"))):
            if isinstance(node, ast.BinOp) and isinstance(node.op, sums):
                assert isinstance(node.op, ast.Add) and makes_text(node), f"{path.name}:{node.lineno}"


def makes_text(node):
    """Whether a sum joins pieces of HTML: a text literal or a call of a table stands on either side."""
    sides = (node.left, node.right)
    return any(
        isinstance(side, ast.JoinedStr | ast.Call)
        or (isinstance(side, ast.Constant) and isinstance(side.value, str))
        or (isinstance(side, ast.BinOp) and makes_text(side))
        for side in sides
    )


def test_the_rule_on_arithmetic_catches_a_sum_of_numbers():
    assert not makes_text(ast.parse("paco2_mmhg + 1", mode="eval").body)
    assert makes_text(ast.parse("'<p>' + table", mode="eval").body)


def test_only_views_live_and_the_frame_import_the_screen_library():
    users = {
        str(path.relative_to(DASHBOARD))
        for path in sources("")
        if SCREEN_LIBRARY in {name.split(".")[0] for name in imports_of(path)}
    }
    assert users == {"app.py", "server.py", "session.py", "cached.py", "live/__init__.py", "views/bed.py"}


def test_nothing_here_names_an_outside_host():
    texts = {
        path: path.read_text("utf-8")
        for path in DASHBOARD.rglob("*.*")
        if path.suffix in (".py", ".js", ".css")
    }
    assert not [path for path, text in texts.items() if re.search(r"https?://|//cdn|@import|url\(", text)]


def test_the_server_keeps_to_this_machine():
    config = tomllib.loads((ROOT / ".streamlit" / "config.toml").read_text("utf-8"))
    assert config["server"]["address"] == "127.0.0.1"
    assert config["browser"]["gatherUsageStats"] is False
    assert config["client"]["showErrorDetails"] == "none" and config["client"]["showErrorLinks"] is False


def test_a_bare_process_starts_and_ends_cleanly(tmp_path):
    done = subprocess.run(
        [sys.executable, str(DASHBOARD / "app.py")], cwd=tmp_path, capture_output=True, text=True, timeout=300
    )
    assert done.returncode == 0, done.stderr
    assert "Traceback" not in done.stderr and not done.stdout


def test_an_error_reaches_the_log_without_a_patient_s_values():
    log, said = error_util._LOGGER, []

    class Listener(logging.Handler):
        def emit(self, record):
            said.append(self.format(record))

    listener = Listener()
    log.addFilter(server.without_values)
    log.addHandler(listener)
    try:
        raise ValueError("Bed 7: paco2_mmhg = 53")
    except ValueError as why:
        error_util.handle_uncaught_app_exception(why)
    finally:
        log.removeFilter(server.without_values)
        log.removeHandler(listener)
    assert said == [f"ValueError at test_structure.py:{line_of('raise ValueError')}"]


def line_of(words):
    lines = Path(__file__).read_text("utf-8").splitlines()
    return next(n for n, line in enumerate(lines, start=1) if line.strip().startswith(words))
