"""Runs of a design: one driver, carrier and temperature after the other, measured and judged."""
