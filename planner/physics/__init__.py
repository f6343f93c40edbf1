"""Formulas: arrays in, arrays out, numpy only."""
