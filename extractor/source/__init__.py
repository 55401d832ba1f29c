"""Files and data frames as raw cells with their addresses."""
