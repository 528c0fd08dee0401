"""What both sides of the program share: errors, sources, campaigns, symbols."""
