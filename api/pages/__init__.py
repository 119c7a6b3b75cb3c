"""The pages for people: one module a page, on one frame (`api/pages/frame.py` says how)."""
