"""Charge-to-mass ratio, mass and charge of single trapped particles, from laboratory logs."""
