"""The pages, read from the record."""
