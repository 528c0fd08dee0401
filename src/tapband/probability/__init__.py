"""Distributions, propagation and coverage; nothing of pressures."""
