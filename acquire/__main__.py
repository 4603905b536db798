"""``python -m pitchsweep.acquire``: the same as the command ``pitchsweep``."""

from pitchsweep.acquire.cli import main

if __name__ == "__main__":
    main()
