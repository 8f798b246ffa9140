"""Stages and tables of multi-block PLS, and analyses applied to another project."""
