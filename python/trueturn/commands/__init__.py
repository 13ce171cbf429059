"""Commands of `trueturn` that have a file of their own; `trueturn.cli` registers them."""
