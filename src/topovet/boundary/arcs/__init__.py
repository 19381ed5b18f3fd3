"""Nodes with chirality and a surface enter; how many Fermi arcs end where, counted, leaves."""
