"""Tests of the verifier."""
