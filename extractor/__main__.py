"""``python -m extractor``."""

from extractor.commands.main import main

main()
