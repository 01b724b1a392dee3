"""The hour-by-hour year: who comes when, how many beds that wants, and how its hours are read together."""
