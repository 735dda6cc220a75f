"""What the randomisation could have done: cells, keys, selection, enumeration."""
