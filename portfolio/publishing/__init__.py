"""From stored rows to pages: wording, numbers, charts, pages and the published folder."""
