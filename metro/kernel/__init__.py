"""The formulas on plain floats: ``math`` only, so that they run unchanged on a board."""
