"""Alembic migrations of the job records; shipped with the package, run by ``ladderband serve``."""
