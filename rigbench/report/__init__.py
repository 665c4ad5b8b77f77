"""What the results look like: the matrix as picture and as text, and the JSON document."""
