"""When to make how much of what: case, engine, plan and audit."""
