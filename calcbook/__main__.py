"""``python -m calcbook`` is the same as ``calcbook``."""

from calcbook.commands import main

if __name__ == "__main__":
    main()
