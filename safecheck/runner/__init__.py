"""Tasks named by their content, the workers that perform them, and the shards they leave."""
