"""Drivers that come with polrig: each a codec that does no I/O, and a thin shell on a link."""
