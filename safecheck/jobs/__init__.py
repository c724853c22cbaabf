"""The jobs behind the commands: each puts the rooms together for one purpose."""
