"""Sizes past which a document is refused before any work is done with it.

They are far above what an honest document needs. Orders, points and lengths of single fields stand beside the
fields, in `service.analysis` and in the documents here.
"""

from __future__ import annotations

BODY_BYTES_MAX = 1_000_000
"""2000 points of a frequency response written with 17 digits take some 150 kB."""

DEPTH_MAX = 16
"""Objects and arrays inside one another; the deepest honest document has 6."""

KEYS_MAX = 100
"""Keys of one object."""

ITEMS_MAX = 10_000
"""Items of one array."""

VALUES_MAX = 50_000
"""Values in the whole document."""

NUMBER_CHARACTERS_MAX = 400
"""Characters of one number. 17 digits say a float64; 1e308 written out has 309."""

SETTLING_BAND_PERCENT_MIN = 0.1
SETTLING_BAND_PERCENT_MAX = 20.0

REASON_CHARACTERS_MAX = 4000
LINE_CHARACTERS_MAX = 200
TAG_CHARACTERS_MAX = 60
PASSWORD_CHARACTERS_MAX = 128
GAIN_SETS_MAX = 20
OPERATING_POINTS_MAX = 20
PREPARED_BY_MAX = 20
DEVIATIONS_MAX = 60
AREAS_MAX = 100
