package server

// ownerRoutes is everything the owner's face answers.
func ownerRoutes() []route {
	return []route{}
}
