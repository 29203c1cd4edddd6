"""The questions a user asks, each answered by one function with a frozen record."""
