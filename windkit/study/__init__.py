"""Time series, files, decisions and artifacts of one study."""
