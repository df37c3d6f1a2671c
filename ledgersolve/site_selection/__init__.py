"""Which sites to run and whom each one serves: case, engine, plan and audit."""
