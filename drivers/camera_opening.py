"""The camera of a bench with ports: opened, looked at and found fit, or refused (acts).

Modules of one kind of camera are imported only where it is used.
"""

from pitchsweep.configs.bench_model import Bench
from pitchsweep.drivers.devices import BenchClock, Camera
from pitchsweep.drivers.driver_errors import AskedIllegal, DeviceRefused, DriverError


def open_camera(bench: Bench, clock: BenchClock, *, probe_ms: float) -> Camera:
    """The camera, after it stated the size that the bench file says.

    ``probe_ms`` is an exposure that it will be asked for. Raises DriverError: no such
    device, nobody listens, automatic exposure or gain, another size or depth.
    """
    camera = _client(bench, clock, probe_ms)
    try:
        said = camera.identify()
        wanted = (bench.camera.width_px, bench.camera.height_px)
        if (said["width_px"], said["height_px"]) != wanted:
            raise DeviceRefused(
                "camera",
                "wrong-frame",
                f"{said['camera']} gives {said['width_px']} x {said['height_px']}"
                f" pixels, the bench file says {wanted[0]} x {wanted[1]}",
            )
    except DriverError:
        camera.close()
        raise
    return camera


def _client(bench: Bench, clock: BenchClock, probe_ms: float) -> Camera:
    if bench.ports is None:
        raise AskedIllegal("bench", bench.bench, "a bench with ports")
    port = bench.ports.camera
    if port.by == "usb-video":
        from pitchsweep.drivers.usb_camera import UsbCameraClient

        return UsbCameraClient(port, bench.camera)
    if port.by == "network-video":
        from pitchsweep.drivers.stream_camera import StreamCameraClient

        return StreamCameraClient(port, bench.camera)
    from pitchsweep.drivers.still_camera import StillCameraClient

    return StillCameraClient(port, bench.camera, clock, probe_ms=probe_ms)
