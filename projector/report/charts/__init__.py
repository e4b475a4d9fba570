"""Charts, one family a file: each function takes plain names and numbers and returns the drawing as text."""
