"""An invented plant and a year of changes to its loops, made through the calls that a user's tool makes.

Lives here: the plant, its people and its year as data (`data/`), the clock that walks through the year, and
the walk itself, over the HTTP interface. Every name, tag, area and figure of it is invented. May import:
everything to its left, `settings`. Must never know: the tables of the records, how anything is computed.

It is the only part of the service that passes another clock than the real one, and does so only into a store
whose first event says that it is a demonstration.
"""
