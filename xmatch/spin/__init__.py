"""What period and period derivative say: spin-down budgets, fields, death lines, brightness temperature."""
