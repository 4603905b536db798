"""How a command is shown to somebody who will copy it into a shell (pure)."""

import shlex


def typed(*words: object) -> str:
    """``pitchsweep`` and ``words``, quoted where a shell would take them apart."""
    return shlex.join(["pitchsweep", *map(str, words)])
