"""What could have stood in the lost columns: widths of candidates and their ranking."""
