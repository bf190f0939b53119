"""The physiology: arrays in, arrays out. Knows nothing of patients, requests or databases."""
