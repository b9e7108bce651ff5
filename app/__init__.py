"""The page: serves the engine's results to a browser. Data flows one way: state, session, worker, engine, session, figures."""
