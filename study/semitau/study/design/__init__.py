"""Design: the selection and binning with the smallest total expected error."""
