"""Wards followed through time as chains over their patients: a week that repeats, a year, beds that change."""
