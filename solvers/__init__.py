"""The numerical library: problems in, curves with their evidence out.  Knows nothing of JSON, HTTP or files."""
