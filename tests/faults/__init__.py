"""Something dies in the middle, or all write at once: short runs with every test run, long ones by hand."""
