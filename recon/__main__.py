"""`python -m recon`: the same door as the `recon` command."""

from recon.cli.main import main

if __name__ == "__main__":
    main()
