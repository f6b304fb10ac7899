"""The window of rigpose: OpenGL drawing on top of the library. It solves nothing itself."""
