"""`python -m service.command` is `gain-signoff`."""

from service.command.main import main

if __name__ == "__main__":
    main()
