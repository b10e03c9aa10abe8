module example/harbour

go 1.26
