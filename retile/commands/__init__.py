"""What each command does, one module each; ``cli`` holds their options and loads the module that is called."""
