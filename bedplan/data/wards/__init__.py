"""What a ward was like: who was in when, how long they stay, whose patients they are, and whether the figures agree."""
