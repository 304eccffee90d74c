"""The command line. Commands parse, call a public function, print; they compute nothing."""
