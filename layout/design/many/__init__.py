"""Every cell of a plan: what it is, who works on it, what comes back."""
