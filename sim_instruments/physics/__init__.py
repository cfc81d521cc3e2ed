"""Parts from first principles: what a bench would see of a transducer, and what is true of it.

Purpose: complex impedance of simulated parts from elasticity and piezoelectricity (a lossy thickness plate, a
radial ring, a chain of rods), with spread, defects, fixture and instrument imperfections, and each part's
characteristics found on its noiseless curve. No equivalent circuit is used to make a part, so that a mistake in
one cannot cancel out. Time convention e^{+jωt}: a lossy compliance or permittivity has a negative imaginary part.

May import: numpy, scipy, tomllib, and modules of this room. Must not: files, sockets, clocks; chance only from a
generator or seed that is handed in; nothing of ``harness`` or ``drivers``.

To add a kind of part: an element (``elements.Element``) with its admittance at complex frequency, a row in
``families.FAMILIES``. To add a defect: a row in ``defects.DEFECTS``.
"""
