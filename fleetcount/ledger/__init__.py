"""What is remembered: schema, migrations, stores, the chain of checksums, merging into a table."""
