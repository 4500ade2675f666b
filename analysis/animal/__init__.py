"""What the water does to the animal: species tables, osmoregulation, stress, forecast."""
