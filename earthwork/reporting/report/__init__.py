"""The report: one folder with everything that a site meeting needs."""
