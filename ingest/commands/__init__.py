"""What people ask for: who may, what is checked, what follows."""
