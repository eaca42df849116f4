"""From vessels to contents: batched arithmetic that does not depend on company."""
