"""Effects, their intervals, and the textbook tests that stand beside ours."""
