"""Equilibrium: conditions, balance, solution, water, buffering, exchange, solids, mixing. Arrays in, arrays out."""
