"""``python -m sms_resource.cli``."""

from sms_resource.cli import main

if __name__ == "__main__":
    main()
