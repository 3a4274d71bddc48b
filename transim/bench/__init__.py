"""Measured data: records of an oscilloscope as figures with uncertainties, and parameters fitted to them."""
