"""From the developed skin to the finished shell mesh."""
