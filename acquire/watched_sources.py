"""The files that a job was read from stay as they are while it runs. Acts (disk).

The run works from its own frozen copy. Somebody who edits the original meanwhile says
that the bench, the part or the plan is no longer what was looked at: that is a trip,
and tomorrow's job is a file of its own.
"""

from collections.abc import Mapping
from contextlib import AbstractContextManager
from dataclasses import replace

from pitchsweep.acquire.bench_devices import BenchDevices
from pitchsweep.acquire.sweep_session import BenchRequest, OpenBench
from pitchsweep.configs.reader import LoadedJob
from pitchsweep.safety.file_watch import file_sha256


def sources_of(loaded: LoadedJob) -> dict[str, str]:
    """Path -> SHA-256 of every file that ``loaded`` was read from, as they are now."""
    paths = {path.absolute() for path in loaded.files.values()}
    return {str(path): file_sha256(path) for path in sorted(paths)}


def watching(open_bench: OpenBench, sources: Mapping[str, str]) -> OpenBench:
    """``open_bench`` with a guard that trips when one of ``sources`` changes."""

    def opened(request: BenchRequest) -> AbstractContextManager[BenchDevices]:
        permit = replace(request.permit, sources=dict(sources))
        return open_bench(replace(request, permit=permit))

    return opened
