"""Two runs compared: what was recorded of each, which effects moved, and why."""
