"""The search for samples whose tubes were exchanged."""
