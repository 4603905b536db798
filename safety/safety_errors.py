"""What can go wrong in this folder.

SafetyError
 +-- GateRefused         not allowed to begin; nothing was switched on
 |    +-- OutsideHazardLimits  no published limit holds there, so no figure is given
 +-- GateTripped         emission was dropped and stays off until acknowledged
 |    +-- GuardLost      the guard process itself ended or fell silent
 +-- SignerRefused       a signer, key, passphrase or answer cannot be used (exit 2)
 +-- LedgerBroken        an entry of the ledger does not follow from the one before
 +-- RecordForged        a register or signed record is not what the ledger has
 +-- GateTableGap        the gate has no entry for what happened (state unchanged)
"""

from typing import ClassVar

CAUTION = (
    "this program is no safety function: the hard-wired interlock, the local rules and"
    " the laser safety officer decide"
)


class SafetyError(Exception):
    """Base of this folder's errors; ``exit_code`` is what the command line returns."""

    exit_code: ClassVar[int] = 3


class GateRefused(SafetyError):
    """Raised when emission may not begin; nothing was switched on."""

    def __init__(self, what: str, remedy: str) -> None:
        self.what = what
        self.remedy = remedy
        super().__init__(f"{what}; nothing was switched on\n{remedy} ({CAUTION})")


class OutsideHazardLimits(GateRefused):
    """Raised when a hazard figure is asked for where the limits do not reach."""

    def __init__(self, quantity: str, value: str, allowed: str) -> None:
        self.quantity = quantity
        self.value = value
        self.allowed = allowed
        super().__init__(
            f"{quantity} {value} lies outside what the hazard limits cover",
            f"allowed: {allowed}; otherwise the officer works the figures out",
        )


class GateTripped(SafetyError):
    """Raised when the guard has dropped emission and latched.

    ``event`` names the fault as the gate table does, ``reason`` says it in words.
    """

    def __init__(self, event: str, reason: str) -> None:
        self.event = event
        self.reason = reason
        super().__init__(
            f"the gate tripped ({event}): {reason}; dark was commanded\nlook at the"
            f" bench, acknowledge the trip, then resume the run ({CAUTION})"
        )


class GuardLost(GateTripped):
    """Raised when the guard ended unasked or stopped answering.

    The unit then drops out by itself when its keep-alive runs out.
    """

    def __init__(self, reason: str) -> None:
        super().__init__("guard-lost", reason)


class SignerRefused(SafetyError):
    """Raised when a signer, key or passphrase cannot be used; nothing is done then."""

    exit_code: ClassVar[int] = 2

    def __init__(self, name: str, what: str, remedy: str) -> None:
        self.name = name
        self.what = what
        super().__init__(
            f"signer {name!r}: {what}; nothing was signed or entered\n  {remedy}"
        )


class LedgerBroken(SafetyError):
    """Raised when the ledger's chain does not hold; ``entry`` counts from 1."""

    def __init__(self, path: str, entry: int, reason: str) -> None:
        self.path = path
        self.entry = entry
        self.reason = reason
        super().__init__(
            f"{path}: entry {entry} of the ledger is broken: {reason}\n"
            "keep the file as it is, show it to the safety officer, begin a new one"
        )


class RecordForged(SafetyError):
    """Raised when a file beside the ledger says otherwise than the ledger."""

    def __init__(self, path: str, what: str, remedy: str) -> None:
        self.path = path
        self.what = what
        super().__init__(f"{path}: {what}\n  {remedy}")


class GateTableGap(SafetyError):
    """Raised when the gate's table has no entry; the state is left as it was."""

    def __init__(self, state: object, event: object) -> None:
        self.state = state
        self.event = event
        super().__init__(
            f"the gate has no entry for event {event!r} in state {state!r}"
        )
