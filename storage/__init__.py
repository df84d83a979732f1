"""The log: SQLite under it, records and derived rows in it. Knows tables, not screens.

Reading order: records.py, rows.py, schema.py, writer.py, reader.py, rebuild.py.
"""
