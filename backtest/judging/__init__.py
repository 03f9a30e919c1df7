"""Tests of forecasts, one family a file, all answering with the same frozen Result."""
