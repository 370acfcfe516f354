"""Joins the steps: check, batch, run, report, a new study; a module each, imported when its command needs it."""
