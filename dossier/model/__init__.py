"""What is said: frozen, exact values without input or output; imports no sibling package."""
