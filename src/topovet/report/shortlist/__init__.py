"""Ranked candidates go in; the shortlist as page, JSON, CSV and Parquet comes out."""
