"""The commands: parse, one call, print; one module per noun.

Nothing here loads a scientific library when it is imported, so that help and version answer at once.
"""
