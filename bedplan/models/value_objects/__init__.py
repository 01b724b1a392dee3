"""What is given to a model and what it answers: stays, demand, the bed curve; every figure checked once, here."""
