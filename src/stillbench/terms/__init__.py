"""One noise term a file. A new term = one new file here and one line in catalogue.py.

All functions work in unit samples: time counted in samples, coefficients in units of the quantity per sample. A
coefficient in SI is the unit-sample one times ``sample_interval ** time_power``.
"""
