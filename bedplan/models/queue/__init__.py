"""What a queue for beds needs to know: the spread of stays, and how it is carried through the year."""
