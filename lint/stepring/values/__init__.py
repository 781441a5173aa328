"""Fourth stage, the first engine: what each integer can be, everywhere."""
