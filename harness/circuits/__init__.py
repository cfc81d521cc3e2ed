"""Equivalent circuits: parameters → admittance, characteristic frequencies, coupling factors.

PURE: numbers in, numbers out. May import records, characteristics, quantities, errors, NumPy and
scipy.special; nothing with a file, clock or wire. ``resonator`` is the circuit every fit uses,
``frequencies`` reads the six critical frequencies off it, ``coupling`` turns frequencies into coupling
factors. To add a circuit: its admittance here with the source of its formula, its derivatives in
``fitting.model``, and a row in the enumerated contract test.
"""
