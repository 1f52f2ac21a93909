"""Schema of a case file: the only importer of pydantic."""
