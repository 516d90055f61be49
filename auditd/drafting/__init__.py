"""A first plan from what has landed: what each column is, judged by its values, and why."""
