"""Which hosts look as if they belong to one farm: rows of ``farm_groups``."""
