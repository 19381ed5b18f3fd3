"""One parameter of H is turned; what leaves is where the indices flip or the gap closes first."""
