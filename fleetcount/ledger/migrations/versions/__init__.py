"""The migrations of the ledger's schema, one module a version."""
