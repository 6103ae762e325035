"""Wire schemas, one module a noun."""
