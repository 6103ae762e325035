"""What the service does, one module a noun."""
