"""Many cases go in; their dossiers, and a ranked list of what has been vetted, come out."""
