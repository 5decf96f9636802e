"""What the README and the package lists promise is so."""

import re
import shlex
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text("utf-8")
COMMANDS = [
    line for block in re.findall(r"```sh\n(.*?)```", README, re.DOTALL) for line in block.splitlines()
]
PYTHON = ".venv/bin/python"
EXAMPLES = [line for line in COMMANDS if line.startswith(f"{PYTHON} -m engine")]
PINNED_WITH_A_REASON = re.compile(r"[\w-]+==[\d.]+\S* +# \w.+")


def _only_command_ending(end: str) -> str:
    (command,) = [line for line in COMMANDS if line.endswith(end)]
    return command


def test_the_run_that_checks_everything_uses_the_readme_s_own_test_command():
    lines = (ROOT / ".ci" / "run").read_text("utf-8").splitlines()
    assert f"{_only_command_ending('-m pytest')} || exit 1" in lines


def test_one_line_installs_and_starts_what_is_there():
    steps = [shlex.split(step) for step in _only_command_ending("dashboard/app.py").split(" && ")]
    assert [step[0] for step in steps] == ["python3", ".venv/bin/pip", ".venv/bin/streamlit"]
    assert (ROOT / steps[1][-1]).is_file() and (ROOT / steps[2][-1]).is_file()


def test_the_first_paragraph_states_the_job_and_the_caution_is_there():
    first = README.split("\n\n")[1]
    assert "last arterial gas" in first and "before anything is" in first
    assert "never makes one" in README and "Not for emergencies" in README


def test_places_the_documents_name_exist():
    texts = README + (ROOT / "DEVELOPERS.md").read_text("utf-8")
    named = set(re.findall(r"\b((?:engine|dashboard|demo_patients|tests)/[\w./-]*\w/?)", texts))
    assert "engine/physics" in {name.rstrip("/") for name in named}
    assert sorted(name for name in named if not (ROOT / name).exists()) == []


def test_what_the_program_runs_on_is_pinned_each_with_its_reason():
    lines = (ROOT / "requirements.txt").read_text("utf-8").splitlines()
    assert lines[-1] == "-e ."
    packages = [line for line in lines[:-1] if not line.startswith("#")]
    assert packages and [line for line in packages if not PINNED_WITH_A_REASON.fullmatch(line)] == []


def test_what_the_tests_need_is_pinned_each_with_its_reason():
    text = (ROOT / "pyproject.toml").read_text("utf-8")
    extra = tomllib.loads(text)["project"]["optional-dependencies"]["test"]
    rows = [line.strip().replace('"', "").replace(",", "", 1) for line in text.splitlines() if "==" in line]
    assert len(rows) == len(extra)
    assert [row for row in rows if not PINNED_WITH_A_REASON.fullmatch(row)] == []


@pytest.mark.slow
@pytest.mark.parametrize("example", EXAMPLES, ids=lambda line: " ".join(line.split()[3:]))
def test_examples_of_the_terminal_work_as_printed(example: str, tmp_path: Path):
    """In a folder that sees the demo patients, so that what an example writes stays out of the project."""
    (tmp_path / "demo_patients").symlink_to(ROOT / "demo_patients")
    line = example.replace(PYTHON, shlex.quote(sys.executable), 1)
    ran = subprocess.run(line, shell=True, cwd=tmp_path, capture_output=True, text=True, timeout=600)
    assert ran.returncode == 0, ran.stderr
    written = re.findall(r"--out (\S+)", example)
    assert ran.stdout or written
    assert all((tmp_path / name).stat().st_size for name in written)
