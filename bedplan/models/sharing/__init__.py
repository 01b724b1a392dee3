"""Beds that several kinds of patient share, at steady demand: overflow, a shared bay, beds held back."""
