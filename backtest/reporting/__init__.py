"""From a record to pages: reads, words and draws; never fits or tests."""
