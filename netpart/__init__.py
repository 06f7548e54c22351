"""Divide a gate-level netlist into area-balanced blocks with few crossing nets."""
