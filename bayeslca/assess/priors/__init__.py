"""What the priors do: power scaling, weights and refits under other priors."""
