"""Farms and honest look-alikes planted into a base graph, so that an order of candidates can be judged.

Data flow: a `web.BaseGraph` (from `bases`) -> `web.PlantedWeb` <- `farms`, `lookalikes` (what can be planted)
-> `plan.plant` (which of them, how many, from one seed) -> `gathered` (scores and links of the candidates, by
scipy) -> `judged` (how well an order does).
"""
