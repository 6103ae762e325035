"""What is kept: engine, column types, tables, queries, journal, unit of work."""
