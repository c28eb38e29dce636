"""What a fit makes of a world that is not quite the one that its templates describe."""
