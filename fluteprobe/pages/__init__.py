"""What is drawn, from values already computed. matplotlib is imported here alone."""
