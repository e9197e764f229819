def why_not(*a): return None
