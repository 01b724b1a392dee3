"""From the patients a ward admitted to those who wanted a bed on it, and to the demand a model takes."""
