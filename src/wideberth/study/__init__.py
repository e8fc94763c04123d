"""What a person states and measured: records, reading, checking, coding, templates."""
