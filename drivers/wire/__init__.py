"""Bytes to and from instruments: plain TCP, VISA (HiSLIP, VXI-11, USBTMC, GPIB), serial lines, memory.

The only room that knows sockets, PyVISA and pyserial, and the only one where their exceptions become ours; each of
those libraries is loaded when the first wire of its kind is opened. May import: ``drivers.errors``,
``drivers.codec``. Must not: know what the bytes mean. To add one: a class with the methods of ``protocol.Wire``, a
form in ``resource``, a line in ``opening``, and its cases in ``tests/drivers``. This file imports nothing.
"""
