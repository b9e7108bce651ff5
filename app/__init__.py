"""The page: a design goes from the state to the engine, its results to the figures; data flows one way."""
