"""Judgements on a reduction: may the tripod come down, and what the operator must know."""
