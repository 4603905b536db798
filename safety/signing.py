"""Ed25519 signatures and the files that hold private keys. Acts on key files only.

What is signed begins with its purpose, so that a signature over one kind of record
never counts for another. Loaded late: asking for help needs no cryptography.
"""

import os
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING

from pitchsweep.safety.ledger_chain import Signed
from pitchsweep.safety.safety_errors import SignerRefused

if TYPE_CHECKING:
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey

ENTRY = b"pitchsweep ledger entry\n"
SIGN_OFF = b"pitchsweep sign-off\n"
SHORTEST_PASSPHRASE = 8
PRIVATE_MODE = 0o600


@dataclass(frozen=True)
class PrivateKey:
    """A signer's opened private key; ``public`` is 64 hexadecimal digits."""

    name: str
    public: str
    _key: "Ed25519PrivateKey" = field(repr=False)

    def sign(self, purpose: bytes, message: bytes) -> Signed:
        """The signature over ``purpose`` followed by ``message``."""
        return Signed(self.public, self._key.sign(purpose + message).hex())


def signature_holds(signed: Signed, purpose: bytes, message: bytes) -> bool:
    """True when ``signed.signature`` is its key's over purpose and message.

    Ed25519 as of RFC 8032; anything that is no key or no signature is False.
    """
    from cryptography.exceptions import InvalidSignature
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey

    try:
        key = Ed25519PublicKey.from_public_bytes(bytes.fromhex(signed.key))
        key.verify(bytes.fromhex(signed.signature), purpose + message)
    except (InvalidSignature, ValueError):
        return False
    return True


def new_key(name: str) -> PrivateKey:
    """A fresh key pair, in memory only."""
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey

    return _opened(name, Ed25519PrivateKey.generate())


def write_key(path: Path, key: PrivateKey, passphrase: str) -> None:
    """Writes ``key`` to ``path``, which must not exist: encrypted PKCS8, mode 600.

    Raises SignerRefused for a short passphrase or an existing file, OSError.
    """
    from cryptography.hazmat.primitives.serialization import (
        BestAvailableEncryption,
        Encoding,
        PrivateFormat,
    )

    if len(passphrase) < SHORTEST_PASSPHRASE:
        raise SignerRefused(
            key.name,
            f"the passphrase has {len(passphrase)} characters",
            f"allowed are {SHORTEST_PASSPHRASE} or more",
        )
    pem = key._key.private_bytes(
        Encoding.PEM,
        PrivateFormat.PKCS8,
        BestAvailableEncryption(passphrase.encode("utf-8")),
    )
    path.parent.mkdir(mode=0o700, parents=True, exist_ok=True)
    try:
        handle = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL, PRIVATE_MODE)
    except FileExistsError:
        raise SignerRefused(
            key.name, f"{path} exists already", "choose another name"
        ) from None
    with os.fdopen(handle, "wb") as file:
        file.write(pem)
        file.flush()
        os.fsync(file.fileno())


def open_key(path: Path, name: str, passphrase: str) -> PrivateKey:
    """The private key at ``path``.

    Raises SignerRefused when it is missing, open to others, damaged, of another kind
    or when the passphrase is wrong.
    """
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
    from cryptography.hazmat.primitives.serialization import load_pem_private_key

    data = read_private(path, name)
    try:
        key = load_pem_private_key(data, passphrase.encode("utf-8"))
    except (ValueError, TypeError):
        raise SignerRefused(
            name, "the passphrase does not open the key", f"the key is {path}"
        ) from None
    if not isinstance(key, Ed25519PrivateKey):
        raise SignerRefused(name, f"{path} holds no Ed25519 key", "enrol anew")
    return _opened(name, key)


def read_private(path: Path, name: str) -> bytes:
    """What is in a file that only its owner may read.

    Raises SignerRefused when it cannot be read or others may read or write it.
    """
    try:
        with open(path, "rb") as file:
            mode = os.fstat(file.fileno()).st_mode
            data = file.read()
    except OSError as error:
        raise SignerRefused(
            name,
            f"{path} cannot be read ({error.strerror})",
            "'pitchsweep signer list' shows who is enrolled on this computer",
        ) from None
    if os.name == "posix" and mode & 0o077:
        raise SignerRefused(
            name, f"{path} is open to other users", f"chmod 600 {path}, then try again"
        )
    return data


def _opened(name: str, key: "Ed25519PrivateKey") -> PrivateKey:
    from cryptography.hazmat.primitives.serialization import Encoding, PublicFormat

    public = key.public_key().public_bytes(Encoding.Raw, PublicFormat.Raw)
    return PrivateKey(name, public.hex(), key)
