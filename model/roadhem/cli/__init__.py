"""The command line: thin verbs over the rooms of the runtime."""
