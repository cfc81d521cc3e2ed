"""Ringtrue's job: sweep a part, find its resonance, judge it, record it.

The rooms, from the doors down to the types, and what each may import are drawn in
DEVELOPERS.md and enforced by import-linter. This file imports nothing, so that no room
can reach another through the package root.
"""

__version__ = "0.1.0"
