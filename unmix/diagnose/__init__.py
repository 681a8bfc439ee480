"""Can the answer be trusted? Functions on arrays and results that know no solver."""
