"""From what a row says to the one name of a host, its public suffix and its registrable domain.

In the order of the flow: `native` decides plain values many at a time, `canonical` (over `addresses`
and `idn`) the odd ones, `suffixes` splits the canonical hosts. `octets` is between Arrow and numpy.
"""
