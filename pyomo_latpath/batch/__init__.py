"""Many instances: records, a journal, workers, and what is written at the end."""
