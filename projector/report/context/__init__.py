"""The typed context of the page: one frozen record a section, each field saying what it is."""
