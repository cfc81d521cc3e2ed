"""The commands. A door: it reads options, calls one thing, prints; no decision lives here.

May import everything in the house; the heavy libraries only inside the functions that need them, so that ``--help``
stays quick (ruff's PLC0415 is off here for that reason alone). One module a command; ``options`` and ``output`` are
shared; ``showing`` puts events into words, ``watching`` keeps the station's terminal, ``typing_in`` reads what is typed
there. To add a command: its module, one line in ``app``, an example in its help, a row in the tests of exit codes.
"""

from harness.cli.app import main

__all__ = ["main"]
