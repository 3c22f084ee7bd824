"""From a titration to the alkalinity or acidity that it stands for, by every recognized method."""
