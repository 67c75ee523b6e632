"""The parts of judging: findings, limits weighed, early ends, places, and what follows from them."""
