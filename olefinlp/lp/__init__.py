"""Labelled numbers → algebra (Pyomo) → HiGHS → values, shadow prices, certificate."""
