"""What only a simulated bench offers: its clock, spots, air, the person on the spot."""

from dataclasses import asdict

from pitchsweep.drivers.devices import AirReading, BenchReading, Label, SpotReading
from pitchsweep.drivers.twin_link import ANSWER_TIMEOUT_S, TwinAddress, TwinLink

METER_TIMEOUT_S = 1.0


class TwinWorldClient:
    """The twin's bench clock (a BenchClock), spots door, air, door and reset button."""

    def __init__(self, address: TwinAddress) -> None:
        self._link = TwinLink(address)

    def now_s(self) -> float:
        """Bench time."""
        return float(self._link.ask("now"))

    def wait(self, seconds: float) -> None:
        """Lets bench time pass: at once in rehearsal, by sleeping at real speed."""
        self._link.ask("wait", seconds=seconds, timeout_s=seconds + ANSWER_TIMEOUT_S)

    def seat_part(
        self, mount: int, mount_deg: float, face_deg: float = 0.0, part: int = 0
    ) -> None:
        """The person on the spot seats part ``part`` of a lot as mount ``mount``."""
        self._link.ask(
            "seat", mount=mount, mount_deg=mount_deg, face_deg=face_deg, part=part
        )

    def spots(self, label: Label) -> list[SpotReading]:
        """Spots of this moment; none without light and none while the stage turns."""
        rows = self._link.ask("spots", label=asdict(label))
        return [SpotReading(**row) for row in rows]

    def read_air(self) -> AirReading:
        """Air and part temperature now."""
        return AirReading(**self._link.ask("air"))

    def sense(self, laser: str, planned_s: float) -> BenchReading:
        """Every sensor now; ``air`` is None when that sensor is missing."""
        said = self._link.ask("sense", laser=laser, planned_s=planned_s)
        air = said["air"]
        return BenchReading(
            air=None if air is None else AirReading(**air), power_mw=said["power_mw"]
        )

    def read_meter(self, laser: str) -> float:
        """What a meter where the part sits shows now, in mW; 0 in the dark."""
        said = self._link.ask("meter", laser=laser, timeout_s=METER_TIMEOUT_S)
        return float(said)

    def ask_person(self, what: str) -> str:
        """The person on the spot does what they are asked; who it was."""
        return str(self._link.ask("person", what=what))

    def set_door(self, *, closed: bool, channel: int | None = None) -> None:
        """The person on the spot closes or opens the door (or one contact of it)."""
        self._link.ask("door", closed=closed, channel=channel)

    def press_reset(self) -> None:
        """The person on the spot presses the unit's reset button."""
        self._link.ask("press-reset")

    def cut_power(self) -> None:
        """The stage loses its zero and the unit its light."""
        self._link.ask("cut-power")

    def close(self) -> None:
        """Closes the connection; the twin goes on."""
        self._link.close()
