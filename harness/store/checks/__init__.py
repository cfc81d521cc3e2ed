"""What ``verify`` is made of: one module a question, each yielding findings and changing nothing.

SHELL, inside the store. ``schema``: are tables and guards as made? ``chain``: does every record follow the one
before? ``repeats``: does every repeated column, attempt, lot and sweep say what the document says? ``strays``: rows
that belong to nothing, and rows that were given a number and are gone. To add a check: a module here, and its call in
``verify``.
"""
