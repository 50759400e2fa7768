"""Arrays and callables in, frozen results with an Outcome out."""
