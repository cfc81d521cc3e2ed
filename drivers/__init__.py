"""Instruments, as bytes and as what they are for; usable from a notebook without the harness.

``roles`` says what a meter, a scanner and a handler are; ``wire`` moves bytes; ``codec`` turns bytes into
values and back; ``dialects`` holds the words of one family of instruments each. This file imports nothing.
"""
