"""Figures of recipes, studies and families; each function returns a matplotlib `Figure` that nothing else shares."""
