"""An independent solver of the model equations, built on general libraries, and what the program must share with it."""
