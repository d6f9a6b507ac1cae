mod simulate_van;
