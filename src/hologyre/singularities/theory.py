"""Closed forms of the theory of isotropic random waves, to hold measured statistics against."""
