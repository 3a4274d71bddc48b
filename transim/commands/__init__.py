"""What the commands do; each module has one, and none knows how its options are spelled."""
