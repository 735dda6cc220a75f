"""Writing and reading what a run leaves behind."""
