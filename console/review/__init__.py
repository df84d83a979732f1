"""The review: what a session's trials say of the modules, with how sure that is."""
