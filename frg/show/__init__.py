"""Tables, plots, LaTeX, HTML report: read records only."""
