"""What a circuit is and does: expressions, circuits, total states, runs; readers and writers of files. No solver."""
