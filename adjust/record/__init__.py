"""The client's record: JSON, tables, drawing and summary, one file an output."""
