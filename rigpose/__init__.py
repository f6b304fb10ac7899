"""Poses mechanical linkages for keyframed shots: every assembly, every length kept."""
