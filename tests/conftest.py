"""Settings for the whole suite: generated cases are the same in every run."""

import os
import tempfile
from collections.abc import Iterator

import hypothesis
import pytest

# As the program itself does; must stand before anything loads numpy.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

hypothesis.settings.register_profile("same-every-run", derandomize=True, deadline=None)
hypothesis.settings.load_profile("same-every-run")


@pytest.fixture(autouse=True, scope="session")
def guards_of_this_suite_only() -> Iterator[str]:
    """Guards of the tests are found in a folder of their own, and no others."""
    with tempfile.TemporaryDirectory() as folder, pytest.MonkeyPatch.context() as patch:
        patch.setenv("PITCHSWEEP_GUARDS", folder)
        yield folder


@pytest.fixture(autouse=True, scope="session")
def no_signers_but_those_of_this_suite() -> Iterator[str]:
    """Signers, sign-offs and ledger of whoever runs the tests are not touched."""
    with tempfile.TemporaryDirectory() as folder, pytest.MonkeyPatch.context() as patch:
        patch.setenv("PITCHSWEEP_HOME", folder)
        yield folder
