"""Drawings of what was computed, one for page and paper.

Lives here: the response and frequency charts as reportlab drawings made from stored curves, their form as
SVG for a page, their text alternative, and the typeface that page and paper share. May import: reportlab,
analysis (results only) and judgement (digits and words). Must never know: the web, SQL, a record's state, a
person.

A drawing shows stored points and nothing else: no curve is computed, smoothed or carried on here.
"""
