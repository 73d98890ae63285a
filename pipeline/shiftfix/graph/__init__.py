"""The runner: hooks, node descriptions, pipeline file, execution and provenance; knows no physics."""
