"""What a state tells: heat transport by several definitions, budgets, layers, resolution."""
