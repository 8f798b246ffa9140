"""What speaks for and against pairs that passed, how steady they are, and what a design can find."""
