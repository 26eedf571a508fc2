"""Reports: take a Result, return text or bytes, compute nothing."""
