"""The differentiable tracer."""
