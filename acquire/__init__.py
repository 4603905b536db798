"""The controller and the front door: command line, journal, sweep, resume."""
