"""A simulated bench: real connections, parts with physics, and trouble on demand.

Purpose: an impedance analyser (SCPI over HiSLIP and TCP), a barcode scanner and a part handler (pseudo-terminals)
around one fixture, so that a whole station can be tried and tested without hardware. Instruments are pure state
machines (``analyser``, ``scanner``, ``handler`` around ``bench``, with ``scpi``, ``status``, ``faults``); ``physics``
makes the parts, ``tray`` lays them out; ``rig`` and ``serve`` open the connections (``listener``, ``tcp``, ``hislip``,
``pty_line``, ``control``).

May import: the standard library, numpy, scipy. Must not: ``harness`` or ``drivers``, so that a shared mistake cannot
cancel out; in the pure modules also no I/O and no clock, and chance from a seed only.

To add an instrument: a module whose ``respond`` takes bytes and returns bytes, its connection in ``rig``, its line in
``station_file``. To add a command to the analyser: a row in its table. To add a fault: ``faults``.
"""
