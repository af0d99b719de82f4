"""From a screened record to its noise terms: which, how large, how sure."""
