"""Belief, the one observation model and the one error model, and the forecast made from them."""
