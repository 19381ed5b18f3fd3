"""`_hr.dat` and `_tb.dat` files go in; H(R) as written comes out, and can be written back."""
