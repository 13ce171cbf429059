"""Prove product-formula circuits against a certified reference."""
