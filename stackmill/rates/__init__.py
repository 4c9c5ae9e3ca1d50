"""The only place where a law meets a material: yields, milling rates, facets, and what is believed of them."""
