"""A data sheet and a series of samples on the wire: JSON columns, CSV and NDJSON.

``layout``   what a data sheet says of the series, as the reading needs it
``shapes``   what a performance answer looks like
"""
