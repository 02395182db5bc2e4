"""What is counted: series, objects, tally, coefficient table."""
