"""Values from outside, each with its source: what the tool computes is compared with what others printed."""
