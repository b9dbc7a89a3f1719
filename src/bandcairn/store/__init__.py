"""The cache: nodes as Parquet files, verified on the way in and on the way out. Only here is pyarrow imported."""
