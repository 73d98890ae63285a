"""shiftfix: from received-frequency logs of several stations to a fix with an honest error."""
