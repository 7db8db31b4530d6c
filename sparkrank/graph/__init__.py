"""Edge rows → a graph in work files: ``rows`` → ``hosts`` → ``tiles`` → ``peeling`` → ``cells``.

``plan`` sizes the grid, ``folder`` names the files, ``sinks`` brings Spark rows into numpy tasks,
``build`` runs the stages and recognises what is already done.
"""
