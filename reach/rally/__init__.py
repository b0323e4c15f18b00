"""How large the usable juggling envelope is: strikes from ballistics, cycles between them, and what bounds them."""
