"""An invented parts warehouse whose order log the demonstration watches."""
