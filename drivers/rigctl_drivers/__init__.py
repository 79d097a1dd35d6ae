"""Drivers that ship with polrig, one per command convention."""
