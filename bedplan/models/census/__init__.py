"""How many patients want a bed at once if nobody is ever turned away: booked, in groups, and all together."""
