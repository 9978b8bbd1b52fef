"""Who runs the tasks: in place, or local workers under supervision."""
