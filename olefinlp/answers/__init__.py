"""The plan and what is computed around it: plain objects and tables."""
