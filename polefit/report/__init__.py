"""What people see: text, JSON, figures and the page, from a result and nothing else."""
