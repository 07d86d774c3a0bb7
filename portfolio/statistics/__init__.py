"""The judgement's arithmetic: numpy and scipy only, vectorised over characteristics, no input or output."""
