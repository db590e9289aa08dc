"""What open standards have a form for, and a plain table for what they have not."""
