"""How a series of samples comes in: JSON columns, CSV and NDJSON made into core samples.

``layout``   what a data sheet says of the series, as the reading needs it
"""
