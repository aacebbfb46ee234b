"""The command line: one small file for each verb."""
