"""Queries a Parquet export in SQL.

Usage: tautrail export trials/ --out fleet; query_fleet.py fleet
Needs: duckdb, or any other engine that reads Parquet partitioned by folders.
"""

import sys

import duckdb

fleet = sys.argv[1]


def table(name):
    return f"read_parquet('{fleet}/{name}/*/*/*.parquet', hive_partitioning = true)"


query = f"""
SELECT t.rig, t.date, count(*) AS launches, round(avg(r.value), 3) AS mean_launch_speed, any_value(r.unit) AS unit
FROM {table('trials')} t JOIN {table('results')} r USING (trial_id)
WHERE t.outcome = 'launched' AND r.name = 'launch_speed'
GROUP BY t.rig, t.date ORDER BY t.rig, t.date NULLS LAST
"""
for row in duckdb.sql(query).fetchall():
    print(*row)
