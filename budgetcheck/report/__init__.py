"""Renderers: each takes an Assessment, or the findings of a refused input, and returns text; none computes anything."""
