"""Facts to tables and figures to a page and a document."""
