"""Schema history of the store, applied by Alembic when a store is opened."""
