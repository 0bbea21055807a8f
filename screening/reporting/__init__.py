"""The report of a run: figures, colours, one HTML file."""
