"""Proofs about a set of rules: each module proves one sort of thing; findings have place, example and remedy."""
