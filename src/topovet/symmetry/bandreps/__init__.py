"""Any space group in any cell enters; its band representations and indicator group leave."""
