"""The whole job in one call; records written, read and replayed; files in and out."""
