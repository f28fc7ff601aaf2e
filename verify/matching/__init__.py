"""Node correspondences between two circuits: guessed by simulation, chosen to cut all loops, proved by SAT."""
