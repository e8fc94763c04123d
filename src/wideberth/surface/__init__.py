"""Canonical and ridge analysis of fitted surfaces."""
