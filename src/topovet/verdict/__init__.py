"""Results of all witnesses go in; what is concluded, what stays open and why come out."""
