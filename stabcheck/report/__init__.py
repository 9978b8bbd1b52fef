"""From a run file to an answer: statistics, tables, figures, methods text."""
