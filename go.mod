module leadline

go 1.26
