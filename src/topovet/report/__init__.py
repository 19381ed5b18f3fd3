"""Results and verdicts go in; JSON, figures and the HTML dossier come out."""
