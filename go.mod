module torrloom

go 1.26
