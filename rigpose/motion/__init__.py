"""Shots: channels over frames, rows of poses, baking and its events."""
