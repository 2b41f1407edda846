"""Many bubbles and much time: from one collapse to an exposure."""
