"""Parts at the station, as streams of events: one part, and a whole lot of them.

SHELL. May import station and everything below it. Time is an argument. Whoever shows the events (terminal, page,
tests) decides nothing: a verdict appears in a ``Recorded`` event, and only after its record is durable.

``events`` what happens · ``part`` one attempt at one part · ``serials`` where serials come from · ``lot`` the loop,
the tries, the handler and when to hold the lot.
"""
