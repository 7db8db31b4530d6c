"""What a run leaves in its output folder, and the order that makes it whole or absent.

`attempts` names one try at a run and its places, `lock` keeps a run to one holder, `write` puts a
table into the attempt's own folder and describes it (`entries`, `digest`), `by_tasks` does so for
large tables, whose rows tasks left in scratch files (`parts`), `records` commits a finished step,
`manifest` commits the run, `outcome` says how the job ended, `clean` removes files that nothing
names. Data first, then one small file that makes it count.
"""
