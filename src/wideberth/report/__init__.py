"""The memo and its figures, written from a record; nothing here computes."""
