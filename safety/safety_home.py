"""Where signers, keys, sign-offs and the people's ledger are kept.

``PITCHSWEEP_HOME`` if set, else ``$XDG_CONFIG_HOME/pitchsweep``, else
``~/.config/pitchsweep``::

    ledger.jsonl      what people did: enrolments, sign-offs, revocations, runs
    signers.json      the register, a copy of what the ledger says; compared with it
    keys/NAME.pem     private keys under a passphrase, mode 600
    sign-offs/ID.json signed records
    revoked/          a file for each sign-off and each key that counts no more
    door-sheets/      one page for the door, for each sign-off
    attended/ID/      the guard's ledger of each attended permit (and its twin's files)

Every run besides keeps its guard's own ledger; its count and head are entered into the
people's ledger when the run ends.
"""

import os
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

VARIABLE = "PITCHSWEEP_HOME"


@dataclass(frozen=True)
class SafetyHome:
    """The folder and the names in it; nothing is made before it is written to."""

    folder: Path

    @property
    def ledger(self) -> Path:
        """The people's ledger."""
        return self.folder / "ledger.jsonl"

    @property
    def register(self) -> Path:
        """The register of signers."""
        return self.folder / "signers.json"

    @property
    def sign_offs(self) -> Path:
        """The folder of signed records."""
        return self.folder / "sign-offs"

    @property
    def door_sheets(self) -> Path:
        """The folder of door sheets."""
        return self.folder / "door-sheets"

    def record(self, identifier: str) -> Path:
        """Where the sign-off with this identifier is."""
        return self.sign_offs / f"{identifier}.json"

    def revoked(self, what: str) -> Path:
        """The file whose presence revokes a sign-off's identifier or a public key."""
        return self.folder / "revoked" / what

    def attended(self, identifier: str) -> Path:
        """The folder of the attended permit with this identifier."""
        return self.folder / "attended" / identifier

    def key(self, name: str) -> Path:
        """Where the private key of ``name`` is."""
        return self.folder / "keys" / f"{name}.pem"


def safety_home(environment: Mapping[str, str] | None = None) -> SafetyHome:
    """The home that ``environment`` (default: the process's own) names, absolute."""
    values = os.environ if environment is None else environment
    if values.get(VARIABLE):
        return SafetyHome(Path(values[VARIABLE]).expanduser().absolute())
    above = values.get("XDG_CONFIG_HOME") or os.path.expanduser("~/.config")
    return SafetyHome(Path(above).absolute() / "pitchsweep")
