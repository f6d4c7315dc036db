"""From a study file to evidence: scenes, trials, statistics, tables and figures."""
