"""Results as text: tables that fit 80 columns, in a terminal and in a pipe."""
