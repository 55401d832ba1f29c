"""Sampling distributions of effect sizes: noncentral limits and exact moments."""
