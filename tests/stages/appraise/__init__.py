"""The stage that judges a plan on held-out days."""
