"""The store: one transaction per tick in SQLite through SQLAlchemy Core."""
