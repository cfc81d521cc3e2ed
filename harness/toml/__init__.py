"""Strict TOML files, read by models: every mistake in one go, each with its line, key and remedy.

PURE: text in, values or mistakes out. May import characteristics, quantities, errors and pydantic. Limit files and
station files both go through here. ``document`` reads a file by its model, ``positions`` knows the line of every key,
``readers`` reads single values, ``findings`` turns pydantic's errors into sentences. To add a kind of value: a reader.
"""
