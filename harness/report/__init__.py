"""Reports: tables, figures and pages."""
