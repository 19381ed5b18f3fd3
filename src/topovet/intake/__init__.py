"""Files of a case folder go in; checked records of what they say come out."""
