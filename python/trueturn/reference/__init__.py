"""Certified reference evolution."""
