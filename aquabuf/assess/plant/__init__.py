"""The treatment operator's questions: products, steps, doses, feeding, and what would upset them."""
