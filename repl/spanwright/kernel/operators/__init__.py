"""One file an algebra: generators, relations, action, straightening to canonical form."""
