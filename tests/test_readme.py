"""README and DEVELOPERS keep the shape that people and machines rely on."""

import re
import subprocess
import sys
from pathlib import Path

import pytest
from repository import ROOT


def _blocks(heading: str) -> list[str]:
    """The fenced blocks under ``## heading`` of README.md."""
    text = (ROOT / "README.md").read_text(encoding="utf-8")
    sections = re.split(r"(?m)^## ", text)[1:]
    (body,) = [s for s in sections if s.splitlines()[0].strip() == heading]
    return re.findall(r"(?ms)^```[a-z]*\n(.*?)^```$", body)


@pytest.mark.parametrize("heading", ["Run", "Test"])
def test_readme_gives_exactly_one_command_block(heading: str) -> None:
    (block,) = _blocks(heading)
    assert len(block.strip().splitlines()) == 1


def test_the_run_command_sweeps_a_shipped_job() -> None:
    (block,) = _blocks("Run")
    (job,) = re.findall(r"pitchsweep sweep demo:([a-z0-9-]+)", block)
    assert (ROOT / "configs" / "jobs" / f"{job}.yaml").is_file()


def test_developers_page_is_short() -> None:
    text = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    assert len(text.splitlines()) < 80


def _examples() -> list[str]:
    """The console blocks under Use, for a shell."""
    return [b for b in _blocks("Use") if "pitchsweep" in b]


def test_the_examples_under_use_run_as_written(tmp_path: Path) -> None:
    """Every console block in README's own order, in one empty folder."""
    program = f"{sys.executable} -m pitchsweep.acquire"
    script = "set -e\npitchsweep() { " + program + ' "$@"; }\n'
    script += "\n".join(_examples())
    done = subprocess.run(
        ["bash", "-c", script], cwd=tmp_path, capture_output=True, text=True
    )
    assert done.returncode == 0, done.stderr
    assert done.stdout.count("Pitch ") == 4
    assert "percent-level" in done.stdout
    (run,) = (tmp_path / "nights").iterdir()
    assert (run / "report.html").is_file() and (run / "result.png").is_file()


def test_readme_states_every_exit_code() -> None:
    text = (ROOT / "README.md").read_text(encoding="utf-8")
    said = {int(code) for code in re.findall(r"(?m)^\| (\d) \|", text)}
    assert said == {0, 2, 3, 4, 5, 6}
