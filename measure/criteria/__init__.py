"""Published definitions, one file per family, each clause with its evidence."""
