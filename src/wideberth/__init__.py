"""wideberth: one setpoint with ranges from a response-surface experiment."""

__version__ = "0.1.0"
