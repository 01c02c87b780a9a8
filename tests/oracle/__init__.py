"""An independent solver of the model equations, and what the program must share with it."""
