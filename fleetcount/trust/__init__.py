"""Why the table is believed: published values now; recounts, audit and certificate later."""
