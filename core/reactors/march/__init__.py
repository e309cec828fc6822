"""From inlet to outlet, step by step: plug flow, beds, batches, recycles."""
