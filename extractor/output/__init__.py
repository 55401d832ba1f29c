"""Files and terminal: what was found, written down. Nothing here computes."""
