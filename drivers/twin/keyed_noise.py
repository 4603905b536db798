"""Random numbers that depend on what they are for, never on when they are drawn.

Every draw is keyed by (seed, quantity, mount, laser, repeat, step, exposure). A key is
hashed into the key of a counter-based generator, so a step that is repeated after an
interruption sees the same noise, and a new quantity disturbs no other.
"""

import hashlib

import numpy as np


def keyed_generator(
    seed: int,
    quantity: str,
    *,
    mount: int = 0,
    laser: str = "",
    repeat: int = 0,
    step: int = 0,
    exposure: int = 0,
) -> np.random.Generator:
    """A generator that is the same for the same key, on every machine.

    ``quantity`` names what is drawn (for example ``"screen distance"``); parts of the
    key that do not matter for the quantity are left at their defaults.
    """
    key = (seed, quantity, mount, laser, repeat, step, exposure)
    digest = hashlib.blake2b(repr(key).encode(), digest_size=16).digest()
    return np.random.Generator(np.random.Philox(key=int.from_bytes(digest, "little")))
