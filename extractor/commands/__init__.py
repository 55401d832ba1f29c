"""The command line: one module per command, no statistics inside."""

SETTINGS = {"help_option_names": ["-h", "--help"], "max_content_width": 100}
"""How every command shows its help."""
