"""Waves around the body: load behaviours as sums over nodal diameters, and what excites them."""
