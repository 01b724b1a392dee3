"""A ward played through patient by patient: who comes, who gets which bed, what is counted."""
