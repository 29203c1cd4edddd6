"""The linear operator of one column as a sum of named terms."""
