"""What is kept: the store behind one door per kind of thing."""
