"""Every report, by its kind: sections for the screens, whole files for the rest."""
