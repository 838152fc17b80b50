"""`gradeline watch`: a survey is reduced again whenever one of its files is saved, and the open page follows."""
