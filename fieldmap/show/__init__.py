"""What a person sees: tables, figures, panels."""
