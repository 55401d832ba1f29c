"""The catalogue of relations: one module per family, each a page to check against its sources."""
