"""Reading, cleaning, describing and estimating: from a records file to a demand."""
