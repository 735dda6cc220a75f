"""Each endpoint as numbers that add up over an arm."""
