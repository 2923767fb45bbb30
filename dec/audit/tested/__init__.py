"""What the readings say against each other: errors alone and together."""
