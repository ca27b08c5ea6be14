"""What goes out: rows turned into JSON, GeoJSON and CSV."""
