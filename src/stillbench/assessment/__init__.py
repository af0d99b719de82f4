"""From results to answers: does it conform, does it not, or is it not yet decided."""
