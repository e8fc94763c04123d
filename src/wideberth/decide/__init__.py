"""Goals, guards and region made one problem, searched, and judged."""
