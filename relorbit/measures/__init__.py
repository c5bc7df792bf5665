"""What was seen: the measures of a pair, its file, and the reading of other people's lists."""
