"""A graph and the reviewed lists → PageRank and trust of every host, many columns at once.

``members`` finds the lists' hosts in the graph, ``columns`` says what each column starts from,
``pull`` is the multiplication over cells, ``layers`` computes peeled hosts, ``solver`` iterates the
core, ``mixing`` extrapolates between its steps, ``reach`` finds what the good core reaches.  ``solve``
runs them for a run; ``folder`` names the files.
"""
