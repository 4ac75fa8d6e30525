"""The commands of the command line, a file a family, and what they share."""
