"""What goes into an audit of a network: readings, what is known beside them, and the question."""
