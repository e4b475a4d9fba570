"""Issuer-optimal exercise: the optimal-stopping solve on one curve, arrays in and numbers out (C4)."""
