"""Files in and out: plain tables, outlines and datasets, no science. The only disk contact besides the bundled data."""
