"""Bands and operators enter; how the levels compare with those of all atomic limits leaves."""
