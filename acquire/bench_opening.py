"""Opens the bench of a session, simulated or with ports. Acts (processes, ports)."""

from contextlib import AbstractContextManager

from pitchsweep.acquire import bench_session, hardware_bench
from pitchsweep.acquire.bench_devices import BenchDevices
from pitchsweep.acquire.sweep_session import BenchRequest


def open_bench(request: BenchRequest) -> AbstractContextManager[BenchDevices]:
    """The bench, its guard armed and dark. Raises as the opener of its kind does."""
    if request.folder.job.bench.ports is not None:
        return hardware_bench.open_hardware_bench(request)
    return bench_session.open_twin_bench(request)
