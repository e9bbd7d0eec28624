"""Stores written by each earlier migration, and bringing them up."""
