"""Records and statistics → what people read: terminal tables, a lot's page, SVG, CSV, JSON.

PURE: values in; text or things to print out. Templates are package resources. Who writes a file or prints is outside.
May import statistics, judging, records, characteristics, quantities, errors, rich, jinja2; never the store, a clock,
a socket, or anything from another host: every page works offline and runs no script.

- ``words`` (marks, phrases, cautions) and ``amounts`` (numbers with units) are shared by all;
- ``terminal`` makes rich renderables, ``hanging`` wraps sentences and chooses what suits a terminal's width;
- ``lot_page`` is the model of a lot's page, ``lot_view`` puts it in words, ``templates/lot.html.j2`` lays it out,
  ``svg`` and ``histogram`` draw; ``lot_csv`` and ``json_form`` are for programs.

To add a page: a frozen model of all it shows, a template in ``templates``, a test that every number on it equals its
source (numbers stand in ``<data>`` elements with their key, so that a test can read them back).
"""
