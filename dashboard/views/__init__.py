"""The screens, one ``show`` each: they ask the session and the engine and lay out the answers."""
