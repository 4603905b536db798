"""The simulated bench: a process of its own with its own optics."""
