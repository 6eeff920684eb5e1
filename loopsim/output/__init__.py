"""Tables, trends, pictures and test reports rendered from results."""
