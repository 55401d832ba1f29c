"""From a printed text or a spreadsheet cell to a number and the interval of numbers that print alike."""
