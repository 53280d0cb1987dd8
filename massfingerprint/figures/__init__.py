"""Maps and charts: the only room with matplotlib and cartopy. Each figure takes finished tables, computes nothing."""
