"""Circuits in and out: OpenQASM."""
