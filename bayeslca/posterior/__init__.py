"""What was learnt: draws with names, tables, membership, storage."""
