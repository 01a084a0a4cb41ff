"""WHAT crystallises: growth and nucleation laws, dosage, material records."""
