"""When the weights fail: the cheapest way to an answer."""
