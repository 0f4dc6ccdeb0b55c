"""Edits by hand: their log, their replay on tables, what deserves a look, how two logs agree."""
