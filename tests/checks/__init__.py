"""Published and closed-form figures of the literature that the program must reproduce."""
