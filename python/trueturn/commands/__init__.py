"""Commands of the command line that stand in files of their own."""
