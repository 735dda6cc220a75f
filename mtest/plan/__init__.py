"""What was fixed in advance: records, reading, sealing."""
