"""Discriminating experiments: the case read in other ways, each put to the witnesses."""
