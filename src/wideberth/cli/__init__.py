"""The shell door: parse, call, show."""
