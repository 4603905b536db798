"""A few faults over the real processes; ``fault_campaign.py`` plays all of them."""

from pathlib import Path

import pytest
from faults.fault_campaign import CASES, check, job_for, play

SMALL = (("zero-lost", "re-home"), ("gone", "pause"), ("blocked", "retry"))


@pytest.mark.parametrize(("does", "policy"), SMALL)
def test_a_fault_is_met_as_declared(tmp_path: Path, does: str, policy: str) -> None:
    (case,) = [case for case in CASES if case.does == does]
    check(case, policy, play(job_for(case, policy, 2), tmp_path))
