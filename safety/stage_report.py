"""What the controller tells the guard of the stage, inside every heartbeat. Pure."""

from dataclasses import dataclass


@dataclass(frozen=True)
class StageReport:
    """What the controller knows of the stage; ``read_at_s`` on its monotonic clock.

    ``power_mw`` is the power at the part: what was last read there, or the laser's full
    drive where nothing reads it; ``power_at_s`` when (None: of now).
    """

    step: int
    commanded_deg: float
    readback_deg: float
    read_at_s: float
    turning: bool
    power_mw: float
    power_at_s: float | None = None


def beat_fields(stage: StageReport | None, now_s: float) -> dict[str, object]:
    """The fields of a heartbeat or light request sent at ``now_s`` (monotonic)."""
    if stage is None:
        return {"sent_s": now_s, "step": None}
    power_at_s = now_s if stage.power_at_s is None else stage.power_at_s
    return {
        "sent_s": now_s,
        "step": stage.step,
        "commanded_deg": stage.commanded_deg,
        "readback_deg": stage.readback_deg,
        "read_age_s": now_s - stage.read_at_s,
        "turning": stage.turning,
        "power_mw": stage.power_mw,
        "power_age_s": now_s - power_at_s,
    }
