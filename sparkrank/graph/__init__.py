"""Edge rows → a graph in work files: ``scan`` → ``hosts`` → ``tiles`` → ``peeling`` → ``cells``.

``pieces`` cuts the input into tasks, ``plan`` sizes the grid, ``folder`` names the files, ``build`` runs
the stages and recognises what is already done.
"""
