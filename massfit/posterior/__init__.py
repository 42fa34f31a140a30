"""Network posterior: likelihood, sampler, quadrature, diagnostics, summary."""
