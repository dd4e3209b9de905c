"""The only writers of results: layer, map, report, tables."""
