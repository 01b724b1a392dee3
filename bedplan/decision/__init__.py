"""Rules, decisions and comparisons over bed curves."""
