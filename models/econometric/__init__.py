"""Econometric models: regressions of counts, amounts and links."""
