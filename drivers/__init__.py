"""Links to instruments and the adapters that speak through them; knows nothing of scans."""
