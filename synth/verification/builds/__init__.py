"""Every build, not the nominal one: draws, statistics, ranges and yields."""
