"""The mathematics of one control loop.

Lives here: the controller and the plant as dataclasses that check themselves, the open loop made of the two,
and every figure that is computed from it. May import: numpy, scipy, annotated_types; in `second_opinion`
alone python-control. Must never know: the clock, files, logging, the web, SQL, JSON, pydantic, limits or
sentences.

Time is brought to a natural unit of the loop on the way in (`loop`), and back on the way out, so that no
result depends on the unit in which the loop was told.
"""
