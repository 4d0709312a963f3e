"""The report page: a balance as one file for a browser and for paper."""
