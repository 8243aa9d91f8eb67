"""The words of pictures and figures in English, German, Spanish and French."""
