"""The ledger in a database: SQLite or PostgreSQL, through the same code."""
