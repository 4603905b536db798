"""Devices: transports, dialects (bytes in, events out), clients."""
