"""What one layer has alone, taken out before pairs are screened, and what modules carry."""
