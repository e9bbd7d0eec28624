"""What an entry of the history may be about: every kind there is."""

from __future__ import annotations

from typing import Literal

EventKind = Literal[
    "store_made",
    "signing_key_taken_up",
    "signing_key_changed",
    "account_added",
    "account_renamed",
    "account_access_changed",
    "account_closed",
    "password_changed",
    "password_change_refused",
    "password_reset",
    "password_reset_confirmed",
    "token_issued",
    "token_revoked",
    "sign_in_refused",
    "signing_refused",
    "loop_registered",
    "loop_changed",
    "loop_change_proposed",
    "loop_change_confirmed",
    "loop_change_rejected",
    "loop_change_withdrawn",
    "model_added",
    "gains_submitted",
    "gains_approved",
    "gains_rejected",
    "gains_withdrawn",
    "approval_revoked",
    "gains_installed",
    "gains_installed_otherwise",
    "sheet_kept",
    "checkpoint_kept",
]
"""The kinds in the order of a list to choose from. One that was written once stays."""
