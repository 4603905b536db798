"""README and DEVELOPERS keep the shape that people and machines rely on."""

import re

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
