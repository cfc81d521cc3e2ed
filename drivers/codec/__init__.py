"""Bytes ⇄ values: IEEE 488.2 blocks, SCPI text, the lines of scanner and handler.

PURE: no connection, file, clock. May import: numpy, ``drivers.errors``. Whatever bytes come, the result is a value
or an AnswerError. To add one: a module with mirror functions ``encode_…``/``decode_…`` and rows ``(value, bytes)``
in ``tests/drivers/test_driver_codec.py``. This file imports nothing.
"""
