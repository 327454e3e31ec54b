"""Writers: each takes the arrays of one result of the whole body and puts them somewhere."""
