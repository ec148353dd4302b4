"""Pictures of results: charts as Altair objects, diagrams as DOT text. Each says in words what it shows."""
