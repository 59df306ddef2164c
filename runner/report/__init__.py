"""What is written down: JSON, HTML, PDF, tables for machines, signatures and their verification."""
