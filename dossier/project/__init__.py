"""What the engineer wrote: project text to cases, with every fault reported at once."""
