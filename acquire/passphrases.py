"""Where passphrases come from: a private file, or the terminal without echo. Acts."""

import getpass
import sys
from collections.abc import Sequence
from pathlib import Path

from pitchsweep.safety.safety_errors import SignerRefused
from pitchsweep.safety.signing import read_private


class Passphrases:
    """Hands out one passphrase a name.

    ``given`` are texts FILE or NAME=FILE as on the command line; a file holds the
    passphrase on its first line and may be read by its owner only.
    """

    def __init__(self, given: Sequence[str]) -> None:
        self._named: dict[str, Path] = {}
        self._any: Path | None = None
        for text in given:
            name, mark, file = text.partition("=")
            if mark:
                self._named[name] = Path(file)
            else:
                self._any = Path(text)

    def asks(self, name: str) -> bool:
        """True when the passphrase of ``name`` is typed at the terminal."""
        return self._named.get(name, self._any) is None and sys.stdin.isatty()

    def of(self, name: str, *, twice: bool = False) -> str:
        """The passphrase of ``name``; ``twice`` asks again to catch a slip.

        Raises SignerRefused when there is neither file nor terminal, when a file is
        open to others, or when the two entries differ.
        """
        path = self._named.get(name, self._any)
        if path is not None:
            text = read_private(path, name).decode("utf-8", errors="replace")
            return text.partition("\n")[0].rstrip("\r")
        if not sys.stdin.isatty():
            raise SignerRefused(
                name, "no passphrase", "give --passphrase-file, or use a terminal"
            )
        typed = getpass.getpass(f"passphrase of {name}: ")
        if twice and getpass.getpass("the same again: ") != typed:
            raise SignerRefused(name, "the two passphrases differ", "try again")
        return typed
