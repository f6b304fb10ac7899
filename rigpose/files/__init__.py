"""Rig files, shot files and CSV: everything that crosses the door of the program."""
