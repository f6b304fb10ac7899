"""Geometry as pure functions on arrays: meetings of circles and lines, rigid fits, angles."""
