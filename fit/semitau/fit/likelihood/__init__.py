"""The likelihood of binned counts: layout of the templates, expectation, finite templates, constraints; compiled."""
