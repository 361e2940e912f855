"""The report: one self-contained page with pictures, numbers and findings."""
