"""A finished walk goes in; its JSON document, page and text for the terminal come out."""
