"""From a table of text to columns with meaning: dates, wards, codes for patients, reasons, and what the planner was asked."""
