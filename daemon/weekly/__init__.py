"""The weekly moisture log: what a week was like, from the store's rows to page, PDF and CSV."""
