"""What was observed: sources, assembling, checks, frozen arrays."""
