"""Stages and tables of canonical analyses."""
