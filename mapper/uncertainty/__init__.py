"""How sure the totals are: spreads, draws, totals under every draw, and what drives the spread."""
