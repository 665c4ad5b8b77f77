"""Scores: of a run, of a cell, across cells."""
