"""Migrations of the catalogue, run by Alembic."""
