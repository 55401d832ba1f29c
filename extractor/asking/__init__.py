"""What to ask the authors about each row, as tables and letters, and their replies read back."""
