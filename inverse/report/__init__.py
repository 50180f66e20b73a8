"""The report of one fit: a frozen view of the estimate, and its figures, page, terminal summary and files."""
