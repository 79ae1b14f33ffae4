"""perdure: how much stress a viscoelastic part still carries, and how sure that is."""
