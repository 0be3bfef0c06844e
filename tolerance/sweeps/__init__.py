"""Many scenarios: which there are, who computes them, what is finished already, and one table of all."""
