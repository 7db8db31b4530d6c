"""Solved columns → scores and spam mass, one row a host: the table ``host_scores``."""
