"""Routes through the catalogue: found, run over blocks of rows, chosen among, and written down."""
