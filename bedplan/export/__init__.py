"""The justification: facts and sentences first, then one writer a format."""
