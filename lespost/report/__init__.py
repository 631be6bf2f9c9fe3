"""Figures and the page, made from a results folder alone: one module per figure, `figures` for the list, `page` for the page."""
