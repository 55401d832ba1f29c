"""Two or more coders of the same studies: matched, compared, and every dispute weighed by its effect."""
