"""Pure functions on arrays: numpy and scipy only, no files, no frames, nothing printed."""
