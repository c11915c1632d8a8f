"""FlowEquations -> Flow: number systems, discretisations, compilation."""
