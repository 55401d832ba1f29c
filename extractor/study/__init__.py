"""What crosses rows: the terms of one model, the cells of one design, the conditions of one sample."""
