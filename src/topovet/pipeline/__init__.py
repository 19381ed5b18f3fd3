"""Tasks, the graph that orders them, and the store that remembers what they found."""
